package store

import (
	"flag"
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"testing"

	"fluxwarden/store/table"
	"fluxwarden/store/vfs"
)

var writeFormat = flag.Bool("write-format", false, "write the archive of this format version into testdata/format; done once for each version")

// Archives of every format version stay in testdata/format and are read by every later program, to the same rows.
func TestEveryFormatVersionIsRead(t *testing.T) {
	const root = "../testdata/format"
	if *writeFormat {
		writeFormatVersion(t, filepath.Join(root, "v"+strconv.Itoa(FormatVersion)))
	}
	for v := 1; v <= FormatVersion; v++ {
		dir := filepath.Join(root, "v"+strconv.Itoa(v))
		want, err := os.ReadFile(filepath.Join(dir, "read.txt"))
		if err != nil {
			t.Fatal(err)
		}
		a, err := Open(vfs.OS{}, filepath.Join(dir, "archive"))
		if err != nil {
			t.Fatal(err)
		}
		if got, _ := picture(t, a); got != string(want) {
			t.Errorf("version %d reads as\n%s\nwant\n%s", v, got, want)
		}
		if found, err := a.Verify(nil); err != nil || len(found) > 0 {
			t.Errorf("version %d: %v %v", v, found, err)
		}
	}
}

// TestFrozenArchivesAreRead reads archives that released programs have judged: rows, readings, episodes and summaries are what the program read
// that wrote them.
func TestFrozenArchivesAreRead(t *testing.T) {
	const root = "../testdata/format"
	for _, name := range []string{"v1-judged"} {
		dir := filepath.Join(root, name)
		a, err := Open(vfs.OS{}, filepath.Join(dir, "archive"))
		if err != nil {
			t.Fatal(err)
		}
		got := portrait(t, a)
		if *writeFormat {
			if _, err := os.Stat(filepath.Join(dir, "read.txt")); err == nil {
				t.Fatalf("%s: read.txt is there: it is never written again", dir)
			}
			if err := os.WriteFile(filepath.Join(dir, "read.txt"), []byte(got), 0o644); err != nil {
				t.Fatal(err)
			}
		}
		want, err := os.ReadFile(filepath.Join(dir, "read.txt"))
		if err != nil {
			t.Fatal(err)
		}
		if got != string(want) {
			t.Errorf("%s reads as\n%s\nwant\n%s", name, got, want)
		}
		if found, err := a.Verify(nil); err != nil || len(found) > 0 {
			t.Errorf("%s: %v %v", name, found, err)
		}
	}
}

// portrait is what a reader gets out of an archive, station by station, as text.
func portrait(t *testing.T, a *Archive) string {
	t.Helper()
	text := ""
	check := func(err error) {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
	}
	for _, station := range a.Stations() {
		days, err := a.RawDays(station)
		check(err)
		for _, day := range days {
			rows, readings, sum := 0, 0, ""
			check(a.ReadMinutes(station, day*1440, (day+1)*1440, nil, func(r *Rows) error {
				rows, sum = rows+r.Rows, table.Digest(r.Table, 0, r.Rows)
				return nil
			}))
			check(a.ReadRaw(station, day, day, func(b *batch) error { readings += b.Rows(); return nil }))
			committed, err := a.RowDigest(station, day)
			check(err)
			revisions, err := a.Revisions(station, day)
			check(err)
			summaries, err := a.Summaries(station, day, day)
			check(err)
			text += fmt.Sprintf("%s %s: %d readings, %d rows %s, committed as %s, %d revisions, %d summaries\n", station, dayName(day), readings, rows, sum, committed,
				len(revisions), len(summaries))
		}
		episodes, err := a.Faults(station)
		check(err)
		for _, e := range episodes {
			text += fmt.Sprintf("%s %s %s %s %d to %d\n", station, e.Instrument, e.Kind, e.Severity, e.From, e.To)
		}
	}
	return text
}

func writeFormatVersion(t *testing.T, dir string) {
	if _, err := os.Stat(dir); err == nil {
		t.Fatalf("%s is there: archives of released versions are never written again", dir)
	}
	if err := os.MkdirAll(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	a, err := OpenForWriting(vfs.OS{}, filepath.Join(dir, "archive"), Options{})
	if err != nil {
		t.Fatal(err)
	}
	for _, step := range script() {
		if err := step(a); err != nil {
			t.Fatal(err)
		}
	}
	text, _ := picture(t, a)
	if err := a.Close(); err != nil {
		t.Fatal(err)
	}
	if err := os.Remove(filepath.Join(dir, "archive", "lock")); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(dir, "read.txt"), []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
}
