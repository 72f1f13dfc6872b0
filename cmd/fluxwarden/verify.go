package main

import (
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"os"

	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// A verifyLine is one finding as scripts read it: a contract.
type verifyLine struct {
	Path    string `json:"path"`
	Problem string `json:"problem"`
	Damage  bool   `json:"damage"` // false for what only does not belong there
}

// cmdVerify proves an archive intact, or names what is not.
func cmdVerify(args []string) int {
	fs := flag.NewFlagSet("verify", flag.ContinueOnError)
	archive := fs.String("archive", "", "folder of the archive; a daemon may be running meanwhile")
	asJSON := fs.Bool("json", false, "print findings as JSON lines")
	if err := fs.Parse(args); err != nil {
		return parseCode(err)
	}
	if *archive == "" || fs.NArg() > 0 {
		return complain(exitUsage, errors.New("verify: want --archive DIR [--json]"))
	}
	a, err := store.Open(vfs.OS{}, *archive)
	if err != nil {
		return complain(exitProblem, fmt.Errorf("verify: %w", err))
	}
	bar := newProgress(0)
	files := 0
	found, err := a.Verify(func(done, total int) {
		files = total
		bar.show(fmt.Sprintf("file %d of %d", done, total), float64(done)/float64(total))
	})
	bar.done()
	if err != nil {
		return complain(exitProblem, fmt.Errorf("verify: %w", err))
	}
	enc := json.NewEncoder(os.Stdout)
	enc.SetEscapeHTML(false)
	damaged := 0
	for _, f := range found {
		if f.Fatal {
			damaged++
		}
		if *asJSON {
			err = errors.Join(err, enc.Encode(verifyLine{f.Path, f.Problem, f.Fatal}))
			continue
		}
		what := "foreign"
		if f.Fatal {
			what = "damage"
		}
		_, e := fmt.Printf("%s  %s\n", what, f)
		err = errors.Join(err, e)
	}
	if err != nil {
		return complain(exitProblem, fmt.Errorf("verify: %w", err))
	}
	if len(found) > 0 {
		return complain(exitProblem, fmt.Errorf("verify: archive %s: %d findings, %d of them damage", *archive, len(found), damaged))
	}
	fmt.Fprintf(os.Stderr, "intact: %d files and chains of records, %d stations\n", files, len(a.Stations()))
	return exitOK
}
