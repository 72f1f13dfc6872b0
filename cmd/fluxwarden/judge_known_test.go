package main

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"fluxwarden/qc/minute"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// A file judged twice leaves each reading in raw once; a reading that says something else under the same stamp is kept beside the first.
func TestJudgedTwiceIsKeptOnce(t *testing.T) {
	const folder = "../../testdata/readme/"
	text, err := os.ReadFile(folder + "readings.csv")
	if err != nil {
		t.Fatal(err)
	}
	lines := strings.SplitAfter(string(text), "\n")[:200]
	dir := t.TempDir()
	archive := filepath.Join(dir, "archive")
	judge := func(content string) {
		t.Helper()
		name := filepath.Join(dir, "readings.csv")
		if err := os.WriteFile(name, []byte(content), 0o644); err != nil {
			t.Fatal(err)
		}
		if code := cmdJudge([]string{"--site", folder + "site.yaml", "--archive", archive, name}); code != exitOK {
			t.Fatalf("judge gave %d", code)
		}
	}
	rows := func() (n int) {
		t.Helper()
		a, err := store.Open(vfs.OS{}, archive)
		if err != nil {
			t.Fatal(err)
		}
		for _, s := range a.Stations() {
			if err := a.ReadRaw(s, 0, 1<<20, func(b *minute.Batch) error { n += b.Rows(); return nil }); err != nil {
				t.Fatal(err)
			}
		}
		return n
	}
	judge(strings.Join(lines, ""))
	once := rows()
	if once != len(lines)-1 {
		t.Fatalf("raw has %d rows, the file %d", once, len(lines)-1)
	}
	judge(strings.Join(lines, ""))
	if n := rows(); n != once {
		t.Errorf("judged twice, raw has %d rows, want %d", n, once)
	}
	fields := strings.Split(lines[100], ",")
	fields[1] = "9.99"
	judge(lines[0] + strings.Join(fields, ","))
	if n := rows(); n != once+1 {
		t.Errorf("with another value under one stamp raw has %d rows, want %d", n, once+1)
	}
}
