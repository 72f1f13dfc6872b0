package main

import (
	"errors"
	"flag"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"
	"time"

	"fluxwarden/qc/minute"
	"fluxwarden/store"
	"fluxwarden/store/export"
	"fluxwarden/store/vfs"

	"golang.org/x/term"
)

// formats of an export, with what writes them.
var exportFormats = map[string]func(io.Writer, *store.Archive, export.Request) (int, error){"csv": export.CSV, "netcdf": export.NetCDF, "parquet": export.Parquet}

var formatNames = []string{"csv", "netcdf", "parquet"}

// cmdExport writes rows of an archive to a file or to standard output.
func cmdExport(args []string) int {
	fs := flag.NewFlagSet("export", flag.ContinueOnError)
	archive := fs.String("archive", "", "folder of the archive")
	station := fs.String("station", "", "station; may be left out where the archive has one")
	product := fs.String("product", "minutes", strings.Join(export.Products, ", "))
	format := fs.String("format", "csv", strings.Join(formatNames, ", "))
	quantity := fs.String("quantity", "", "quantities, a comma between; of raw channels; all that there are otherwise")
	from := fs.String("from", "", "first minute: a date or RFC 3339; the first there is otherwise")
	to := fs.String("to", "", "end, not included: a date or RFC 3339; the last there is otherwise")
	out := fs.String("out", "", "file to write; standard output otherwise")
	if err := fs.Parse(args); err != nil {
		return parseCode(err)
	}
	if *archive == "" || fs.NArg() > 0 {
		return complain(exitUsage, errors.New("export: want --archive DIR [--station S] [--product P] [--format F] [--quantity Q,...] [--from T] [--to T] [--out FILE]"))
	}
	r := export.Request{Station: *station, Product: *product, From: math.MinInt32, To: math.MaxInt32}
	if *quantity != "" {
		r.Quantities = strings.Split(*quantity, ",")
	}
	write := exportFormats[*format]
	if write == nil {
		return complain(exitUsage, fmt.Errorf("export: %w", &export.UnknownError{What: "format", Word: *format, Known: formatNames}))
	}
	if err := r.Check(); err != nil {
		return complain(exitUsage, fmt.Errorf("export: %w", err))
	}
	if err := exportRange(&r, *from, *to); err != nil {
		return complain(exitUsage, fmt.Errorf("export: %w", err))
	}
	if *out == "" && *format != "csv" && term.IsTerminal(int(os.Stdout.Fd())) {
		return complain(exitUsage, fmt.Errorf("export: %s is no text for a terminal: name a file with --out, or redirect", *format))
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
	if err := exportTo(*out, func(w io.Writer) error { _, err := write(w, a, r); return err }); err != nil {
		code := exitProblem
		if unknown := (*export.UnknownError)(nil); errors.As(err, &unknown) {
			code = exitUsage
		}
		return complain(code, fmt.Errorf("export: %w", err))
	}
	return exitOK
}

func exportRange(r *export.Request, from, to string) error {
	for _, end := range []struct {
		text string
		into *int64
	}{{from, &r.From}, {to, &r.To}} {
		if end.text == "" {
			continue
		}
		t, err := parseInstant(end.text)
		if err != nil {
			return err
		}
		*end.into = minute.FloorDiv(t.Unix(), 60)
	}
	if r.From >= r.To {
		return fmt.Errorf("--from %s is not before --to %s", from, to)
	}
	return nil
}

// exportTo writes to a file, which is there whole or not at all, or to standard output.
func exportTo(name string, write func(w io.Writer) error) error {
	if name == "" {
		return write(os.Stdout)
	}
	f, err := os.CreateTemp(filepath.Dir(name), ".tmp-export-*")
	if err != nil {
		return err
	}
	err = write(f)
	if err == nil {
		err = f.Chmod(0o644)
	}
	if e := f.Close(); err == nil {
		err = e
	}
	if err == nil {
		err = os.Rename(f.Name(), name)
	}
	if err != nil {
		_ = os.Remove(f.Name())
	}
	return err
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
