package main

import (
	"errors"
	"flag"
	"fmt"
	"math"
	"os"
	"time"

	"fluxwarden/store"
	"fluxwarden/store/export"
	"fluxwarden/store/vfs"
)

// cmdExport writes minutes of an archive to standard output.
func cmdExport(args []string) int {
	fs := flag.NewFlagSet("export", flag.ContinueOnError)
	archive := fs.String("archive", "", "folder of the archive")
	station := fs.String("station", "", "station; may be left out where the archive has one")
	product := fs.String("product", "minutes", "minutes")
	format := fs.String("format", "csv", "csv")
	from := fs.String("from", "", "first minute: a date or RFC 3339; the first there is otherwise")
	to := fs.String("to", "", "end, not included: a date or RFC 3339; the last there is otherwise")
	if err := fs.Parse(args); err != nil {
		return parseCode(err)
	}
	if *archive == "" || fs.NArg() > 0 || *product != "minutes" || *format != "csv" {
		return complain(exitUsage, errors.New("export: want --archive DIR --station S --product minutes --format csv [--from T] [--to T]"))
	}
	r := export.Request{Station: *station, From: math.MinInt32, To: math.MaxInt32}
	for _, end := range []struct {
		text string
		into *int64
	}{{*from, &r.From}, {*to, &r.To}} {
		if end.text == "" {
			continue
		}
		t, err := parseInstant(end.text)
		if err != nil {
			return complain(exitUsage, fmt.Errorf("export: %w", err))
		}
		*end.into = t.Unix() / 60
	}
	if r.From >= r.To {
		return complain(exitUsage, fmt.Errorf("export: --from %s is not before --to %s", *from, *to))
	}
	a, err := store.Open(vfs.OS{}, *archive)
	if err != nil {
		return complain(exitProblem, fmt.Errorf("export: %w", err))
	}
	stations, err := stationsOf(a, *station)
	if err != nil {
		return complain(exitProblem, fmt.Errorf("export: %w", err))
	}
	if len(stations) != 1 {
		return complain(exitUsage, fmt.Errorf("export: the archive has %d stations: say which with --station", len(stations)))
	}
	r.Station = stations[0]
	if _, err := export.CSV(os.Stdout, a, r); err != nil {
		return complain(exitProblem, fmt.Errorf("export: %w", err))
	}
	return exitOK
}

// parseInstant reads a date (midnight UTC) or an RFC 3339 time.
func parseInstant(text string) (time.Time, error) {
	if t, err := time.Parse(time.DateOnly, text); err == nil {
		return t, nil
	}
	t, err := time.Parse(time.RFC3339, text)
	if err != nil {
		return t, fmt.Errorf("time %q: want a date such as 2026-06-21 or a time such as 2026-06-21T12:00:00Z", text)
	}
	return t.UTC(), nil
}
