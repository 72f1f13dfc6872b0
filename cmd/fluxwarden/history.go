package main

import (
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"io"
	"os"
	"strings"
	"time"

	"fluxwarden/store"
	"fluxwarden/store/table"
	"fluxwarden/store/vfs"
)

// A revisionChange is a revision of a station-day and how it differs from the one before.
type revisionChange struct {
	store.Revision
	Why     string
	First   bool
	Changes []table.Change
	Model   int
}

// cmdHistory shows the revisions of a station-day.
func cmdHistory(args []string) int {
	fs := flag.NewFlagSet("history", flag.ContinueOnError)
	archive := fs.String("archive", "", "folder of the archive")
	station := fs.String("station", "", "station; may be left out where the archive has one")
	day := fs.String("day", "", "UTC day such as 2026-06-21")
	asJSON := fs.Bool("json", false, "print revisions as JSON lines")
	if err := fs.Parse(args); err != nil {
		return parseCode(err)
	}
	if *archive == "" || *day == "" || fs.NArg() > 0 {
		return complain(exitUsage, errors.New("history: want --archive DIR --station S --day DAY [--json]"))
	}
	t, err := time.Parse(time.DateOnly, *day)
	if err != nil {
		return complain(exitUsage, fmt.Errorf("history: day %q: want a date such as 2026-06-21", *day))
	}
	a, err := store.Open(vfs.OS{}, *archive)
	if err != nil {
		return complain(exitProblem, fmt.Errorf("history: %w", err))
	}
	stations, err := stationsOf(a, *station)
	if err != nil {
		return complain(exitProblem, fmt.Errorf("history: %w", err))
	}
	if len(stations) != 1 {
		return complain(exitUsage, fmt.Errorf("history: the archive has %d stations: say which with --station", len(stations)))
	}
	list, err := historyOf(a, stations[0], t.Unix()/86400)
	if err == nil && len(list) == 0 {
		err = fmt.Errorf("station %s: the archive has no rows of %s", stations[0], *day)
	}
	if err == nil && *asJSON {
		err = writeHistory(os.Stdout, stations[0], *day, list)
	} else if err == nil {
		err = showHistory(os.Stdout, stations[0], *day, list)
	}
	if err != nil {
		return complain(exitProblem, fmt.Errorf("history: %w", err))
	}
	return exitOK
}

// historyOf lists the revisions that the archive still has of a day, the oldest first.
func historyOf(a *store.Archive, station string, day int64) ([]revisionChange, error) {
	revisions, err := a.Revisions(station, day)
	if err != nil {
		return nil, err
	}
	kept := reasonBook{archive: a}
	var list []revisionChange
	var before *store.Rows
	for i := range revisions {
		c := revisionChange{Revision: revisions[i], First: i == 0}
		rows, err := a.RevisionRows(&c.Revision, station, day)
		if err != nil {
			return nil, err
		}
		if i == 0 {
			c.Why = "first revision that is kept"
			if c.Reason != "" {
				c.Why += ", " + c.Reason
			}
		} else {
			c.Why = whyRevised(&kept, station, &revisions[i-1], &c.Revision)
			c.Changes, c.Model = table.Compare(before.Table, rows.Table)
		}
		before = rows
		list = append(list, c)
	}
	return list, nil
}

// whyRevised says why a revision came about, as far as the records tell.
func whyRevised(kept *reasonBook, station string, before, after *store.Revision) string {
	var list []string
	if after.Reason != "" && after.Reason != store.ReasonRules {
		list = append(list, after.Reason)
	}
	if after.RulesDigest != before.RulesDigest && !strings.Contains(after.Reason, "new calibration") && !strings.Contains(after.Reason, "new rules") {
		old, now := kept.kept(before.RulesDigest), kept.kept(after.RulesDigest)
		reason := "new rules"
		if old != nil && now != nil {
			reason = rulesChange(old.Station(station), now.Station(station))
		}
		if reason != "" {
			list = append(list, reason)
		}
	}
	switch {
	case after.JudgeVersion != before.JudgeVersion:
		list = append(list, fmt.Sprintf("judge version %d after %d", after.JudgeVersion, before.JudgeVersion))
	case len(list) == 0 && after.Program != before.Program:
		list = append(list, "another program, "+after.Program+" after "+before.Program)
	}
	if len(list) == 0 {
		return "other: the records do not tell"
	}
	return strings.Join(list, "; ")
}

func showHistory(w io.Writer, station, day string, list []revisionChange) error {
	fmt.Fprintf(w, "%s %s: %d revisions\n", station, day, len(list))
	for i := range list {
		c := &list[i]
		state := "current"
		if c.Superseded {
			state = "superseded"
		}
		when := ""
		if c.Written != "" {
			when = ", written " + c.Written
		}
		fmt.Fprintf(w, "\ncommit %d%s, %s, rules %s, %s, judge version %d\n  why: %s\n  row digest %s\n  %s\n", c.Commit, when, state, short(c.RulesDigest),
			c.Program, c.JudgeVersion, c.Why, c.Digest, c.Path)
		if c.First {
			continue
		}
		if len(c.Changes) == 0 && c.Model == 0 {
			fmt.Fprintln(w, "  no row differs")
		}
		if err := showChanges(w, c.Changes, c.Model); err != nil {
			return err
		}
	}
	return nil
}

func short(digest string) string { return digest[:min(12, len(digest))] }

// A revisionLine is one revision as scripts read it: a contract.
type revisionLine struct {
	Station      string       `json:"station"`
	Day          string       `json:"day"`
	Commit       uint64       `json:"commit"`
	Written      string       `json:"written,omitempty"`
	Current      bool         `json:"current"`
	Rules        string       `json:"rules"`
	Program      string       `json:"program"`
	JudgeVersion int          `json:"judge_version"`
	Why          string       `json:"why"`
	Digest       string       `json:"row_digest"`
	Path         string       `json:"path"`
	Quantities   []changeLine `json:"quantities"`
	Model        int          `json:"model_minutes"`
}

func writeHistory(w io.Writer, station, day string, list []revisionChange) error {
	enc := json.NewEncoder(w)
	enc.SetEscapeHTML(false)
	for i := range list {
		c := &list[i]
		if err := enc.Encode(revisionLine{station, day, c.Commit, c.Written, !c.Superseded, c.RulesDigest, c.Program, c.JudgeVersion, c.Why, c.Digest, c.Path,
			changeLines(c.Changes), c.Model}); err != nil {
			return err
		}
	}
	return nil
}
