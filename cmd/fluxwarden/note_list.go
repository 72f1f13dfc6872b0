package main

import (
	"encoding/json"
	"fmt"
	"io"
	"math"
	"slices"
	"strings"
	"text/tabwriter"

	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// daysWithRows lists the days of a station that are judged, ascending.
func daysWithRows(a *store.Archive, station string) ([]int64, error) {
	if !slices.Contains(a.Stations(), station) {
		return nil, nil
	}
	days, err := a.RawDays(station)
	if err != nil {
		return nil, err
	}
	err = a.EachSummary(station, math.MinInt32, math.MaxInt32, func(s store.Summary) error { days = append(days, s.Day); return nil })
	slices.Sort(days)
	return slices.Compact(days), err
}

// show lists the notes that the archive has.
func (c *noteCommand) show(w io.Writer) error {
	a, err := store.Open(vfs.OS{}, c.archive)
	if err != nil {
		return err
	}
	stations := a.Stations()
	if c.note.Station != "" {
		if !slices.Contains(stations, c.note.Station) {
			return fmt.Errorf("the archive has no station %q", c.note.Station)
		}
		stations = []string{c.note.Station}
	}
	var lines []noteLine
	for _, s := range stations {
		notes, err := a.Notes(s)
		if err != nil {
			return err
		}
		lines = append(lines, noteLines(notes)...)
	}
	if c.asJSON {
		enc := json.NewEncoder(w)
		enc.SetEscapeHTML(false)
		for i := range lines {
			if err := enc.Encode(&lines[i]); err != nil {
				return err
			}
		}
		return nil
	}
	if len(lines) == 0 {
		fmt.Fprintln(w, "no notes")
		return nil
	}
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	fmt.Fprintln(t, "id\tstation\tinstrument\tkind\tfrom\tto\tby\twhat")
	for i := range lines {
		l := &lines[i]
		fmt.Fprintf(t, "%s\t%s\t%s\t%s\t%s\t%s\t%s\t%s\n", l.ID, l.Station, l.Instrument, l.Kind, shortTime(&l.Note, true), shortTime(&l.Note, false), l.By, l.words())
	}
	return t.Flush()
}

// A noteLine is a note as scripts read it: a contract.
type noteLine struct {
	rules.Note
	InForce bool `json:"in_force"`
}

func noteLines(notes []rules.Note) []noteLine {
	force := map[string]bool{}
	for _, n := range rules.InForce(notes) {
		force[n.ID] = true
	}
	var lines []noteLine
	for _, n := range notes {
		lines = append(lines, noteLine{n, force[n.ID]})
	}
	return lines
}

func shortTime(n *rules.Note, from bool) string {
	t := n.To
	if from {
		t = n.From
	}
	if t.IsZero() {
		return ""
	}
	return t.Format("2006-01-02T15:04Z")
}

// words is the rest of a note in one line.
func (l *noteLine) words() string {
	var list []string
	add := func(before, text string) {
		if text != "" {
			list = append(list, before+text)
		}
	}
	if !l.InForce {
		list = append(list, "(withdrawn)")
	}
	add("verdict ", l.Verdict)
	add("of ", l.Quantity)
	add("takes back ", l.Withdraws)
	add("domes cleaned: ", l.Checklist.DomesCleaned)
	add("level ", l.Checklist.Level)
	add("desiccant ", l.Checklist.Desiccant)
	add("capped zero, W/m2: ", l.Checklist.CappedZero)
	add("dome: ", l.Checklist.DomeState)
	add("", strings.ReplaceAll(l.Text, "\n", " "))
	return strings.Join(list, "; ")
}
