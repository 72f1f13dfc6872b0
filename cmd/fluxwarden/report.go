package main

import (
	"bytes"
	"errors"
	"flag"
	"fmt"
	"os"
	"time"

	"fluxwarden/cmd/fluxwarden/console"
	"fluxwarden/ingest/broker"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// cmdReport writes a station's month as one printable page.
func cmdReport(args []string) int {
	fs := flag.NewFlagSet("report", flag.ContinueOnError)
	archive := fs.String("archive", "", "folder of the archive")
	site := fs.String("site", "", "site file, for names, limits and calibrations; the archive's newest rules otherwise")
	station := fs.String("station", "", "station")
	month := fs.String("month", "", "such as 2026-06")
	out := fs.String("out", "", "file to write; the terminal otherwise")
	if err := fs.Parse(args); err != nil {
		return parseCode(err)
	}
	if *archive == "" || *station == "" || *month == "" || fs.NArg() > 0 {
		return complain(exitUsage, errors.New("report: want --archive DIR --station S --month 2026-06 [--site FILE] [--out report.html]"))
	}
	a, err := store.Open(vfs.OS{}, *archive)
	if err != nil {
		return complain(exitProblem, fmt.Errorf("report: %w", err))
	}
	s, err := siteOf(a, *site)
	if err != nil {
		return complain(exitUsage, fmt.Errorf("report: %w", err))
	}
	c := console.New(console.Config{Archive: console.Of(a), Site: func() *rules.Site { return s }, Now: time.Now, Program: "fluxwarden " + version})
	var page bytes.Buffer
	if err := c.Report(&page, *station, *month); err != nil {
		return complain(exitProblem, fmt.Errorf("report: %w", err))
	}
	if *out == "" {
		_, err = os.Stdout.Write(page.Bytes())
	} else {
		err = os.WriteFile(*out, page.Bytes(), 0o644)
	}
	if err != nil {
		return complain(exitProblem, fmt.Errorf("report: %w", err))
	}
	return exitOK
}

// siteOf loads the site file named, or the rules that the archive was last judged with.
func siteOf(a *store.Archive, path string) (*rules.Site, error) {
	if path != "" {
		return rules.Load(path)
	}
	stations := a.Stations()
	if len(stations) == 0 {
		return &rules.Site{}, nil
	}
	return newestRules(a, broker.PartitionOf(stations[0]))
}
