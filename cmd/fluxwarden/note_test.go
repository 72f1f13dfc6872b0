package main

import (
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"
)

func (b *yardBed) note(archive string, args ...string) string {
	b.t.Helper()
	code, out, said := b.run(cmdNote, append([]string{"--archive", archive, "--station", "yard", "--by", "A. Keeper", "--text", "as seen"}, args...)...)
	if code != exitOK {
		b.t.Fatalf("note %v gave %d: %s", args, code, said)
	}
	return strings.TrimSuffix(strings.Fields(out)[1], ":")
}

func (b *yardBed) rejudge(archive string) (said string) {
	b.t.Helper()
	code, out, said := b.run(cmdRejudge, "--archive", archive, "--site", b.site, "--yes")
	if code != exitOK {
		b.t.Fatalf("rejudge gave %d: %s", code, said)
	}
	return out
}

var yardNotes = [][]string{
	{"--instrument", "G1", "--kind", "override", "--verdict", "rejected", "--from", "2026-06-03T10:00Z", "--to", "2026-06-03T11:00Z"},
	{"--instrument", "P1", "--kind", "exchange", "--from", "2026-06-04T08:50Z", "--to", "2026-06-05T14:10Z"},
	{"--instrument", "tracker", "--kind", "maintenance", "--from", "2026-06-09T07:55Z", "--to", "2026-06-09T13:05Z"},
	{"--kind", "cleaning", "--from", "2026-06-10T07:00Z", "--to", "2026-06-10T07:10Z", "--domes-cleaned", "yes", "--dome-state", "dust"},
}

// The rows are the same whether a note came before the readings, between them or after them; withdrawn, they are as if it had never been.
func TestRowsAreOfTheSetOfNotes(t *testing.T) {
	b := newYard(t, 12, yardFaults(t)...)
	dir := func(name string) string { return filepath.Join(b.dir, name) }
	plain, before, between, after := dir("plain"), dir("before"), dir("between"), dir("after")
	b.judge(plain, b.days...)
	without, episodesWithout := b.digests(plain)

	b.judge(after, b.days...)
	var ids []string
	for _, n := range yardNotes {
		ids = append(ids, b.note(after, n...))
	}
	if said := b.rejudge(after); !strings.Contains(said, "note "+ids[0]) {
		t.Errorf("rejudge does not say why: %s", said)
	}
	want, wantEpisodes := b.digests(after)
	if reflect.DeepEqual(want, without) || wantEpisodes == episodesWithout || strings.Contains(wantEpisodes, "Instrument:P1") {
		t.Errorf("the notes change too little: %v", wantEpisodes)
	}
	_, _, said := b.run(cmdRejudge, "--archive", after, "--site", b.site, "--yes")
	if !strings.Contains(said, "nothing changes") {
		t.Errorf("judged once more: %s", said)
	}

	b.judge(before, b.days[0])
	b.judge(between, b.days[:7]...)
	for _, a := range []string{before, between} {
		for i := len(yardNotes) - 1; i >= 0; i-- {
			b.note(a, yardNotes[i]...)
		}
		b.note(a, yardNotes[0]...) // again
	}
	b.judge(before, b.days[1:]...)
	b.rejudge(between)
	b.judge(between, b.days[7:]...)
	for _, a := range []string{before, between} {
		if got, episodes := b.digests(a); !reflect.DeepEqual(got, want) || episodes != wantEpisodes {
			t.Errorf("%s: %v\n%s\nwant %v\n%s", a, got, episodes, want, wantEpisodes)
		}
	}

	code, out, said := b.run(cmdHistory, "--archive", after, "--station", "yard", "--day", "2026-06-03")
	if code != exitOK || !strings.Contains(out, "why: note "+ids[0]+": override by A. Keeper") {
		t.Errorf("history gave %d: %s%s", code, out, said)
	}
	for _, id := range ids {
		b.note(after, "--withdraw", id)
	}
	b.rejudge(after)
	if got, episodes := b.digests(after); !reflect.DeepEqual(got, without) || episodes != episodesWithout {
		t.Error("withdrawn, the notes still act")
	}
	code, out, _ = b.run(cmdNote, "--archive", after, "--list")
	if code != exitOK || strings.Count(out, "(withdrawn)") != len(ids) || strings.Count(out, "\n") != 2*len(ids)+1 {
		t.Errorf("list gave %d: %s", code, out)
	}
	if code, out, _ = b.run(cmdNote, "--archive", after, "--list", "--json"); code != exitOK || !strings.Contains(out, `"in_force":false`) {
		t.Errorf("list --json gave %d: %s", code, out)
	}
}

func TestBadNotesAreRefusedAndNothingIsWritten(t *testing.T) {
	b := newYard(t, 1)
	archive := filepath.Join(b.dir, "archive")
	b.judge(archive, b.days...)
	before := tree(t, archive)
	good := map[string]string{"--station": "yard", "--instrument": "G1", "--kind": "maintenance", "--from": "2026-06-01T09:00Z", "--to": "2026-06-01T09:20Z", "--by": "A. Keeper"}
	for name, x := range map[string]struct {
		flag, value, says string
	}{
		"times backwards":     {"--to", "2026-06-01T08:00Z", "run backwards"},
		"a time that is none": {"--from", "nine", "want a UTC time"},
		"no author":           {"--by", "", "--by"},
		"unknown station":     {"--station", "barn", `station "barn": not in the site file`},
		"unknown instrument":  {"--instrument", "G9", "station yard has G1, P1, D1"},
		"unknown kind":        {"--kind", "rain", "there are remark, maintenance"},
		"override, no reason": {"--kind", "override", "--verdict"},
		"no such note":        {"--withdraw", "0123456789abcdef", "kind maintenance"},
	} {
		args := []string{"--archive", archive}
		for k, v := range good {
			if k != x.flag {
				args = append(args, k, v)
			}
		}
		code, _, said := b.run(cmdNote, append(args, x.flag, x.value)...)
		if code != exitUsage || !strings.Contains(said, x.says) {
			t.Errorf("%s: %d %s, want %q", name, code, said, x.says)
		}
	}
	code, _, said := b.run(cmdNote, "--archive", archive, "--station", "yard", "--by", "x", "--withdraw", "0123456789abcdef")
	if code != exitUsage || !strings.Contains(said, "no such note") {
		t.Errorf("withdraw of none: %d %s", code, said)
	}
	if code, _, said := b.run(cmdNote, "--archive", filepath.Join(b.dir, "nowhere"), "--station", "yard", "--by", "x", "--kind", "remark",
		"--from", "2026-06-01T09:00Z", "--to", "2026-06-01T09:20Z"); code != exitProblem || !strings.Contains(said, "no archive of this program") {
		t.Errorf("no archive: %d %s", code, said)
	}
	if after := tree(t, archive); after != before {
		t.Error("the archive has changed")
	}
	if _, err := os.Stat(filepath.Join(b.dir, "nowhere")); err == nil {
		t.Error("an archive was made")
	}
}
