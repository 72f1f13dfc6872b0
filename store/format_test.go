package store

import (
	"flag"
	"os"
	"path/filepath"
	"strconv"
	"testing"

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
