package main

import (
	"encoding/json"
	"fmt"
	"io"
	"math"
	"strings"
	"text/tabwriter"

	"fluxwarden/cmd/fluxwarden/daemon"
	"fluxwarden/qc/fault"
	"fluxwarden/rules"
	"fluxwarden/store/table"
)

// showDifferences prints what changes for people.
func showDifferences(w io.Writer, list []difference) error {
	for i := range list {
		d := &list[i]
		if d.empty() {
			if _, err := fmt.Fprintf(w, "%s: no change\n", d.Station); err != nil {
				return err
			}
			continue
		}
		fmt.Fprintf(w, "%s: ", d.Station)
		switch {
		case d.Days == 1:
			fmt.Fprintf(w, "1 day changes, %s", dayText(d.FirstDay))
		case d.Days > 1:
			fmt.Fprintf(w, "%d days change, %s to %s", d.Days, dayText(d.FirstDay), dayText(d.LastDay))
		default:
			fmt.Fprint(w, "no row changes")
		}
		if len(d.Reasons) > 0 {
			fmt.Fprintf(w, " (%s)", strings.Join(d.Reasons, "; "))
		}
		fmt.Fprintln(w)
		if err := showChanges(w, d.Quantities, d.Model); err != nil {
			return err
		}
		if d.Summaries > 0 {
			fmt.Fprintf(w, "  what the judge has learnt changes on %d days\n", d.Summaries)
		}
		if d.Products > 0 {
			fmt.Fprintf(w, "  clean products of %d months are made anew: there were none, or by other settings\n", d.Products)
		}
		for k := range d.Come {
			fmt.Fprintf(w, "  + %s\n", episodeText(&d.Come[k]))
		}
		for k := range d.Gone {
			fmt.Fprintf(w, "  - %s\n", episodeText(&d.Gone[k]))
		}
		for k := range d.Changed {
			c := &d.Changed[k]
			fmt.Fprintf(w, "  ~ %s\n", episodeText(&c.Before))
			if episodeText(&c.Before) != episodeText(&c.After) {
				fmt.Fprintf(w, "    %s\n", episodeText(&c.After))
			}
		}
	}
	return nil
}

// showChanges prints changes by quantity as a table.
func showChanges(w io.Writer, list []table.Change, model int) error {
	if len(list) > 0 {
		t := tabwriter.NewWriter(w, 0, 4, 2, ' ', 0)
		fmt.Fprintln(t, "  quantity\tminutes\tverdict\tvalue\tmean change\tlargest\tdetails only\tverdicts")
		for i := range list {
			c := &list[i]
			mean, largest := "", ""
			if c.Both > 0 {
				mean = fmt.Sprintf("%+.2f %s", c.Mean(), unitOf(c.Quantity))
				largest = fmt.Sprintf("%+.2f", c.Largest)
			}
			fmt.Fprintf(t, "  %s\t%d\t%d\t%d\t%s\t%s\t%d\t%s\n", c.Quantity, c.Minutes, c.Verdicts, c.Values, mean, largest, c.Details, movesText(c))
		}
		if err := t.Flush(); err != nil {
			return err
		}
	}
	if model > 0 {
		if _, err := fmt.Fprintf(w, "  sun, clear sky or count of records change in %d minutes\n", model); err != nil {
			return err
		}
	}
	return nil
}

func unitOf(q rules.Quantity) string {
	return table.MinuteColumns()[table.QuantityColumn(q)].Unit
}

func movesText(c *table.Change) string {
	var list []string
	for i := range c.Moves {
		for j, n := range c.Moves[i] {
			if n > 0 {
				list = append(list, fmt.Sprintf("%s to %s %d", rules.Verdict(i), rules.Verdict(j), n))
			}
		}
	}
	return strings.Join(list, ", ")
}

func episodeText(e *fault.Episode) string {
	const layout = "2006-01-02 15:04"
	to := "open"
	if e.To != fault.Open {
		to = minuteTime(e.To).Format(layout)
	}
	return fmt.Sprintf("%s %s, %s, %s to %s", e.Instrument, e.Kind, e.Severity, minuteTime(e.From).Format(layout), to)
}

// A differenceLine is one station's difference as scripts read it: a contract.
type differenceLine struct {
	Station    string               `json:"station"`
	Days       int                  `json:"days"`
	FirstDay   string               `json:"first_day,omitempty"`
	LastDay    string               `json:"last_day,omitempty"`
	Reasons    []string             `json:"reasons"`
	Quantities []changeLine         `json:"quantities"`
	Model      int                  `json:"model_minutes"`
	Learnt     int                  `json:"learnt_days"`
	Come       []daemon.FindingLine `json:"episodes_come"`
	Gone       []daemon.FindingLine `json:"episodes_gone"`
	Changed    []faultPairLine      `json:"episodes_changed"`
	Products   int                  `json:"product_months"`
}

type faultPairLine struct {
	Before daemon.FindingLine `json:"before"`
	After  daemon.FindingLine `json:"after"`
}

// A changeLine is one quantity's change as scripts read it: a contract.
type changeLine struct {
	Quantity string         `json:"quantity"`
	Unit     string         `json:"unit"`
	Minutes  int            `json:"minutes"`
	Verdicts int            `json:"verdict_minutes"`
	Values   int            `json:"value_minutes"`
	Details  int            `json:"detail_minutes"`
	Mean     *float64       `json:"mean_change"`
	Largest  *float64       `json:"largest_change"`
	Moves    map[string]int `json:"verdicts"`
}

func newChangeLine(c *table.Change) changeLine {
	l := changeLine{Quantity: c.Quantity.String(), Unit: unitOf(c.Quantity), Minutes: c.Minutes, Verdicts: c.Verdicts, Values: c.Values, Details: c.Details,
		Moves: map[string]int{}}
	if c.Both > 0 {
		mean, largest := math.Round(1e6*c.Mean())/1e6, c.Largest
		l.Mean, l.Largest = &mean, &largest
	}
	for i := range c.Moves {
		for j, n := range c.Moves[i] {
			if n > 0 {
				l.Moves[rules.Verdict(i).String()+">"+rules.Verdict(j).String()] = n
			}
		}
	}
	return l
}

func changeLines(list []table.Change) []changeLine {
	out := make([]changeLine, len(list))
	for i := range list {
		out[i] = newChangeLine(&list[i])
	}
	return out
}

// writeDifferences prints what changes for scripts, a JSON object a line.
func writeDifferences(w io.Writer, list []difference) error {
	enc := json.NewEncoder(w)
	enc.SetEscapeHTML(false)
	lines := func(list []fault.Episode) []daemon.FindingLine {
		out := make([]daemon.FindingLine, len(list))
		for i := range list {
			out[i] = daemon.NewFindingLine(&list[i])
		}
		return out
	}
	for i := range list {
		d := &list[i]
		l := differenceLine{Station: d.Station, Days: d.Days, Reasons: append([]string{}, d.Reasons...), Quantities: changeLines(d.Quantities), Model: d.Model,
			Learnt: d.Summaries, Come: lines(d.Come), Gone: lines(d.Gone), Changed: []faultPairLine{}, Products: d.Products}
		if d.Days > 0 {
			l.FirstDay, l.LastDay = dayText(d.FirstDay), dayText(d.LastDay)
		}
		for k := range d.Changed {
			l.Changed = append(l.Changed, faultPairLine{daemon.NewFindingLine(&d.Changed[k].Before), daemon.NewFindingLine(&d.Changed[k].After)})
		}
		if err := enc.Encode(&l); err != nil {
			return err
		}
	}
	return nil
}
