package main

import (
	"bufio"
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"io"
	"os"
	"slices"
	"strings"
	"text/tabwriter"
	"time"

	"fluxwarden/cmd/fluxwarden/daemon"
	"fluxwarden/qc/fault"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// cmdFaults lists the episodes of an archive.
func cmdFaults(args []string) int {
	fs := flag.NewFlagSet("faults", flag.ContinueOnError)
	archive := fs.String("archive", "", "folder of the archive")
	station := fs.String("station", "", "one station; all of them otherwise")
	format := fs.String("format", "table", "table or jsonl")
	explain := fs.String("explain", "", "instead of a list, the page of a kind, or of all: what it looks like, how it is told, what to do")
	if err := fs.Parse(args); err != nil {
		return parseCode(err)
	}
	if *explain != "" && fs.NArg() == 0 && *archive == "" {
		return explainKind(os.Stdout, *explain)
	}
	if *archive == "" || fs.NArg() > 0 || *format != "table" && *format != "jsonl" {
		return complain(exitUsage, errors.New("faults: want --archive DIR [--station S] [--format table|jsonl], or --explain KIND"))
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

// explainKind prints the page of a kind, or of all.
func explainKind(w io.Writer, name string) int {
	names := make([]string, 0, rules.FaultKindCount)
	for k := range rules.FaultKind(rules.FaultKindCount) {
		names = append(names, k.String())
		if name == "all" {
			fmt.Fprintf(w, "%s\n", k.Explain())
		}
	}
	if name == "all" {
		return exitOK
	}
	k, ok := rules.ParseFaultKind(name)
	if !ok {
		return complain(exitUsage, fmt.Errorf("faults: kind %q: want all or one of %s", name, strings.Join(names, ", ")))
	}
	fmt.Fprint(w, k.Explain())
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

func minuteTime(m int64) time.Time { return time.Unix(60*m, 0).UTC() }

// writeFaultLines writes one object a line, as the stream FINDINGS has them: a contract.
func writeFaultLines(w *bufio.Writer, all []fault.Episode) error {
	enc := json.NewEncoder(w)
	enc.SetEscapeHTML(false)
	for i := range all {
		if err := enc.Encode(daemon.NewFindingLine(&all[i])); err != nil {
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
