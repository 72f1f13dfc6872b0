package main

import (
	"fmt"
	"io"
	"slices"
	"strings"

	"fluxwarden/ingest/wire"
	"fluxwarden/qc/engine"
	"fluxwarden/rules"
)

// warnOfColumns says which of the station's channels a file lacks and which of its columns nobody reads: most often one of each,
// and a slip of the pen. It is no error, for a logger may write its channels to several files, and what is in the file is good.
func warnOfColumns(w io.Writer, name string, c *wire.CSV, st *rules.Station) error {
	plan, err := engine.NewPlan(st)
	if err != nil {
		return err
	}
	declared := plan.Layout().Channels
	var lacking, unread []string
	for _, channel := range declared {
		if !slices.Contains(c.Channels(), channel) {
			lacking = append(lacking, channel)
		}
	}
	for _, column := range c.Channels() {
		if !slices.Contains(declared, column) {
			unread = append(unread, column)
		}
	}
	if len(lacking) > 0 {
		fmt.Fprintf(w, "warning: %s:1: no column for %s, which the site file names: what reads it is absent here; put the column in or mend its name\n",
			name, strings.Join(lacking, ", "))
	}
	if len(unread) > 0 {
		fmt.Fprintf(w, "warning: %s:1: nothing in the site file reads %s: kept in raw, not judged\n", name, strings.Join(unread, ", "))
	}
	return nil
}
