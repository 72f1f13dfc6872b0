package main

import (
	"errors"
	"flag"
	"fmt"
	"os"

	"fluxwarden/qc/engine"
	"fluxwarden/rules"
)

// cmdLint checks site files with the very code that run uses.
func cmdLint(args []string) int {
	fs := flag.NewFlagSet("lint", flag.ContinueOnError)
	schema := fs.Bool("schema", false, "print the JSON Schema of a site file and stop")
	if err := fs.Parse(args); err != nil {
		return parseCode(err)
	}
	if *schema {
		os.Stdout.Write(rules.Schema())
		return exitOK
	}
	if fs.NArg() == 0 {
		return complain(exitUsage, errors.New("lint: want at least one site file"))
	}
	code := exitOK
	for _, name := range fs.Args() {
		s, err := rules.Load(name)
		if err == nil {
			for i := range s.Stations {
				if _, e := engine.NewPlan(&s.Stations[i]); e != nil {
					err = errors.Join(err, e)
				}
			}
		}
		if err != nil {
			fmt.Fprintln(os.Stderr, err)
			code = exitUsage
			continue
		}
		for _, w := range s.Warnings {
			fmt.Fprintf(os.Stderr, "warning: %v\n", w)
		}
		fmt.Printf("%s: %d stations, rules %s\n", name, len(s.Stations), s.Digest[:12])
	}
	return code
}
