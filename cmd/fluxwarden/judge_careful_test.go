package main

import (
	"math"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// Minutes on which the core panics are left out, as if nothing had been sent for them; all others are judged.
func TestAPanicLeavesTheMinuteOut(t *testing.T) {
	b := newYard(t, 4, yardFaults(t)...)
	bad := []string{"2026-06-02T10:00", "2026-06-02T11:30", "2026-06-03T12:00"}
	lines := func(name string, keep func(line string) bool) string {
		text, err := os.ReadFile(name)
		if err != nil {
			t.Fatal(err)
		}
		var kept []string
		for _, l := range strings.Split(string(text), "\n") {
			if keep(l) {
				kept = append(kept, l)
			}
		}
		return strings.Join(kept, "\n")
	}
	isBad := func(l string) bool {
		for _, m := range bad {
			if strings.HasPrefix(l, m) {
				return true
			}
		}
		return false
	}
	var clean []string
	for _, d := range b.days {
		clean = append(clean, b.write(filepath.Base(d)+".clean.csv", lines(d, func(l string) bool { return !isBad(l) })))
	}
	whole, without := filepath.Join(b.dir, "whole"), filepath.Join(b.dir, "without")
	b.judge(whole, b.days...)
	b.judge(without, clean...)
	want, wantEpisodes := b.digests(without)

	site, err := rules.Load(b.site)
	if err != nil {
		t.Fatal(err)
	}
	a, err := store.OpenForWriting(vfs.OS{}, whole, store.Options{Owner: "test"})
	if err != nil {
		t.Fatal(err)
	}
	trapped := map[int64]bool{}
	for _, m := range bad {
		trapped[minuteNamed(t, m)] = true
	}
	r := &rejudging{archive: a, site: site, siteFile: b.site, from: math.MinInt32, to: math.MaxInt32, atOnce: true,
		trap: func(block *minute.Block, _ int) {
			for row := range block.Rows {
				if block.Records[row] > 0 && trapped[block.Day*minute.PerDay+int64(row)] {
					panic("a minute that the core cannot bear")
				}
			}
		}}
	_, _, said := b.run(func([]string) int {
		if code, err := r.run("", true); code != exitOK || err != nil {
			t.Errorf("rejudge gave %d, %v", code, err)
		}
		return exitOK
	})
	if err := a.Close(); err != nil {
		t.Fatal(err)
	}
	for _, m := range bad {
		if !strings.Contains(said, m+"Z: left out, as if not sent: the judge panicked") {
			t.Errorf("%s is not named: %s", m, said)
		}
	}
	if got, episodes := b.digests(whole); !reflect.DeepEqual(got, want) || episodes != wantEpisodes {
		t.Errorf("got %v\n%s\nwant %v\n%s", got, episodes, want, wantEpisodes)
	}
}

func minuteNamed(t testing.TB, text string) int64 {
	t.Helper()
	at, err := noteTime(text + "Z")
	if err != nil {
		t.Fatal(err)
	}
	return at.Unix() / 60
}
