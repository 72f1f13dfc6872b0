package main

import (
	"bufio"
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"os"
	"slices"
	"strings"
	"text/tabwriter"
	"time"

	"fluxwarden/qc/fault"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// cmdFaults lists the episodes of an archive.
func cmdFaults(args []string) int {
	fs := flag.NewFlagSet("faults", flag.ContinueOnError)
	archive := fs.String("archive", "", "folder of the archive")
	station := fs.String("station", "", "one station; all of them otherwise")
	format := fs.String("format", "table", "table or jsonl")
	if err := fs.Parse(args); err != nil {
		return parseCode(err)
	}
	if *archive == "" || fs.NArg() > 0 || *format != "table" && *format != "jsonl" {
		return complain(exitUsage, errors.New("faults: want --archive DIR [--station S] [--format table|jsonl]"))
	}
	a, err := store.Open(vfs.OS{}, *archive)
	if err != nil {
		return complain(exitProblem, fmt.Errorf("faults: %w", err))
	}
	stations, err := stationsOf(a, *station)
	if err != nil {
		return complain(exitProblem, fmt.Errorf("faults: %w", err))
	}
	var all []fault.Episode
	for _, s := range stations {
		list, err := a.Faults(s)
		if err != nil {
			return complain(exitProblem, fmt.Errorf("faults: %w", err))
		}
		all = append(all, list...)
	}
	slices.SortStableFunc(all, func(x, y fault.Episode) int { return int(x.Raised - y.Raised) })
	w := bufio.NewWriter(os.Stdout)
	if *format == "jsonl" {
		err = writeFaultLines(w, all)
	} else {
		err = writeFaultTable(w, all)
	}
	if err = errors.Join(err, w.Flush()); err != nil {
		return complain(exitProblem, fmt.Errorf("faults: %w", err))
	}
	return exitOK
}

// stationsOf gives the named station of an archive, or all.
func stationsOf(a *store.Archive, id string) ([]string, error) {
	all := a.Stations()
	if id == "" {
		return all, nil
	}
	if !slices.Contains(all, id) {
		return nil, fmt.Errorf("the archive has no station %q; it has %s", id, strings.Join(all, ", "))
	}
	return []string{id}, nil
}

// A faultLine is one episode as scripts read it: a contract.
type faultLine struct {
	ID            string         `json:"id"`
	Rev           int            `json:"rev"`
	Station       string         `json:"station"`
	Instrument    string         `json:"instrument"`
	Kind          string         `json:"kind"`
	AlsoSuspected []string       `json:"also_suspected"`
	Severity      string         `json:"severity"`
	From          time.Time      `json:"from"`
	To            *time.Time     `json:"to"`
	Raised        time.Time      `json:"raised"`
	Confidence    float64        `json:"confidence"`
	Evidence      map[string]any `json:"evidence"`
	Advice        string         `json:"advice"`
}

func minuteTime(m int64) time.Time { return time.Unix(60*m, 0).UTC() }

func newFaultLine(e *fault.Episode) faultLine {
	l := faultLine{ID: e.ID, Rev: e.Rev, Station: e.Station, Instrument: e.Instrument, Kind: e.Kind.String(), AlsoSuspected: []string{},
		Severity: e.Severity.String(), From: minuteTime(e.From), Raised: minuteTime(e.Raised), Confidence: e.Confidence,
		Evidence: map[string]any{}, Advice: e.Advice}
	for _, k := range e.Also {
		l.AlsoSuspected = append(l.AlsoSuspected, k.String())
	}
	if e.To != fault.Open {
		to := minuteTime(e.To)
		l.To = &to
	}
	for _, v := range e.Evidence {
		l.Evidence[v.Name] = map[string]any{"value": v.Value, "unit": v.Unit}
	}
	return l
}

func writeFaultLines(w *bufio.Writer, all []fault.Episode) error {
	enc := json.NewEncoder(w)
	enc.SetEscapeHTML(false)
	for i := range all {
		if err := enc.Encode(newFaultLine(&all[i])); err != nil {
			return err
		}
	}
	return nil
}

func writeFaultTable(w *bufio.Writer, all []fault.Episode) error {
	if len(all) == 0 {
		_, err := fmt.Fprintln(w, "no episode")
		return err
	}
	t := tabwriter.NewWriter(w, 0, 4, 2, ' ', 0)
	fmt.Fprintln(t, "station\tinstrument\twhat\tseverity\tfrom\tto\traised\tsure\tevidence")
	const layout = "2006-01-02 15:04"
	for i := range all {
		e := &all[i]
		to := "open"
		if e.To != fault.Open {
			to = minuteTime(e.To).Format(layout)
		}
		what := e.Kind.String()
		for _, k := range e.Also {
			what += " or " + k.String()
		}
		var numbers []string
		for _, v := range e.Evidence {
			numbers = append(numbers, fmt.Sprintf("%s %g %s", v.Name, v.Value, v.Unit))
		}
		fmt.Fprintf(t, "%s\t%s\t%s\t%s\t%s\t%s\t%s\t%.0f %%\t%s\n", e.Station, e.Instrument, what, e.Severity, minuteTime(e.From).Format(layout),
			to, minuteTime(e.Raised).Format(layout), 100*e.Confidence, strings.Join(numbers, ", "))
	}
	return t.Flush()
}
