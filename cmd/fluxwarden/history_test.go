package main

import (
	"encoding/json"
	"path/filepath"
	"strings"
	"testing"
)

// A day's history: first judged, late readings, another calibration. Other days of the month keep the revision that they are of.
func TestHistoryTellsWhatChangedWhyAndByHowMuch(t *testing.T) {
	b := newYard(t, 10)
	archive := filepath.Join(b.dir, "archive")
	lines := strings.SplitAfter(mustRead(t, b.days[7]), "\n")
	early := b.write("early.csv", strings.Join(lines[:601], ""))
	late := b.write("late.csv", lines[0]+strings.Join(lines[601:], ""))
	b.judge(archive, append([]string{early}, b.days[:7]...)...)
	b.judge(archive, b.days[8:]...)
	b.judge(archive, late)
	b.write("site.yaml", yard("start", "2026-06-08", "8.70"))
	if code, _, said := b.run(cmdRejudge, "--site", b.site, "--archive", archive, "--yes"); code != exitOK {
		t.Fatal(said)
	}
	history := func(day string) (list []revisionLine) {
		code, out, said := b.run(cmdHistory, "--archive", archive, "--day", day, "--json")
		if code != exitOK {
			t.Fatalf("history of %s: %d %s", day, code, said)
		}
		for _, line := range strings.Split(strings.TrimSpace(out), "\n") {
			var l revisionLine
			if err := json.Unmarshal([]byte(line), &l); err != nil {
				t.Fatal(err)
			}
			list = append(list, l)
		}
		return list
	}
	if list := history("2026-06-03"); len(list) != 1 || list[0].Commit != 1 || !list[0].Current {
		t.Errorf("a day that never changed: %+v", list)
	}
	list := history("2026-06-08")
	var commits []uint64
	for _, l := range list {
		commits = append(commits, l.Commit)
		if l.Current != (l.Commit == 4) {
			t.Errorf("commit %d: current is %v", l.Commit, l.Current)
		}
	}
	if len(list) != 4 {
		t.Fatalf("commits %v, want 1 to 4", commits)
	}
	if l := list[2]; !strings.Contains(l.Why, "more readings") || len(l.Quantities) == 0 || l.Quantities[0].Moves["absent>accepted"] < 500 {
		t.Errorf("late readings: %+v", l)
	}
	l := list[3]
	if !strings.Contains(l.Why, "new calibration of G1 from 2026-06-08") || strings.Contains(l.Why, "more readings") {
		t.Errorf("new calibration: why is %q", l.Why)
	}
	for _, q := range l.Quantities {
		switch q.Quantity {
		case "global":
			if q.Values < 600 || q.Mean == nil || *q.Mean >= 0 {
				t.Errorf("global: %+v", q)
			}
		case "direct", "diffuse":
			if q.Values != 0 {
				t.Errorf("%s: %+v", q.Quantity, q)
			}
		}
	}
	if code, out, _ := b.run(cmdHistory, "--archive", archive, "--day", "2026-06-08"); code != exitOK || !strings.Contains(out, "4 revisions") || !strings.Contains(out, "W m-2") {
		t.Errorf("as text: %d\n%s", code, out)
	}
	for _, bad := range [][]string{{"--day", "2026-13-01"}, {"--day", "2020-01-01"}, {"--day", "2026-06-08", "--station", "nowhere"}} {
		if code, _, said := b.run(cmdHistory, append([]string{"--archive", archive}, bad...)...); code == exitOK || said == "" {
			t.Errorf("%v: %d %s", bad, code, said)
		}
	}
}
