package main

import (
	"encoding/json"
	"io/fs"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// rejudgedYard is an archive with every sort of file: two judge runs, a rejudge by another calibration.
func rejudgedYard(t *testing.T) (*yardBed, string) {
	b := newYard(t, 10, yardFaults(t)...)
	archive := filepath.Join(b.dir, "archive")
	b.judge(archive, b.days[:5]...)
	b.judge(archive, b.days[5:]...)
	b.write("site.yaml", yard("start", "2026-06-08", "8.70"))
	if code, out, said := b.run(cmdRejudge, "--site", b.site, "--archive", archive, "--yes"); code != exitOK {
		t.Fatalf("rejudge: %d\n%s%s", code, out, said)
	}
	return b, archive
}

func filesOf(t *testing.T, dir string) (list []string) {
	err := filepath.WalkDir(dir, func(name string, d fs.DirEntry, err error) error {
		if err == nil && !d.IsDir() && d.Name() != "lock" {
			rel, _ := filepath.Rel(dir, name)
			list = append(list, filepath.ToSlash(rel))
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return list
}

// One flipped bit in any file of the archive is found, and the file is named.
func TestVerifyNamesAFlippedBitAnywhere(t *testing.T) {
	b, archive := rejudgedYard(t)
	if code, out, said := b.run(cmdVerify, "--archive", archive); code != exitOK || out != "" {
		t.Fatalf("an intact archive: %d %s %s", code, out, said)
	}
	r := rand.New(rand.NewPCG(3, 9))
	sorts := map[string]int{}
	for _, name := range filesOf(t, archive) {
		top, _, _ := strings.Cut(name, "/")
		sorts[top]++
		path := filepath.Join(archive, name)
		good, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		flips := 3
		if len(good) < 4096 {
			flips = 12
		}
		for range flips {
			at, bit := r.IntN(len(good)), r.IntN(8)
			bad := append([]byte(nil), good...)
			bad[at] ^= 1 << bit
			if err := os.WriteFile(path, bad, 0o644); err != nil {
				t.Fatal(err)
			}
			code, out, said := b.run(cmdVerify, "--archive", archive)
			named := strings.Contains(out+said, name)
			if dir := filepath.Dir(name); strings.HasPrefix(name, "commit/") { // a record may be told by its neighbour
				named = named || strings.Contains(out+said, dir)
			}
			named = named || strings.Contains(out+said, strings.TrimSuffix(name, ".sha256"))
			if code != exitProblem || !named {
				t.Errorf("%s, byte %d, bit %d: %d %s%s", name, at, bit, code, out, said)
			}
		}
		if err := os.WriteFile(path, good, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	for _, want := range []string{"raw", "minutes", "faults", "state", "superseded", "commit", "manifest", "rules", "archive.json"} {
		if sorts[want] == 0 {
			t.Errorf("no file of %s: %v", want, sorts)
		}
	}
}

func TestVerifyNamesForeignFiles(t *testing.T) {
	b, archive := rejudgedYard(t)
	foreign := []string{"notes.txt", "minutes/station=yard/copy.parquet", "commit/05/readme", "superseded/old.txt", "rules/mine.txt"}
	for _, name := range foreign {
		if err := os.MkdirAll(filepath.Dir(filepath.Join(archive, name)), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(filepath.Join(archive, name), []byte("something else"), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	code, out, said := b.run(cmdVerify, "--archive", archive, "--json")
	if code != exitProblem {
		t.Errorf("code %d: %s", code, said)
	}
	for _, name := range foreign {
		if !strings.Contains(out, `"path":"`+name+`"`) {
			t.Errorf("%s is not named in\n%s", name, out)
		}
	}
	for _, line := range strings.Split(strings.TrimSpace(out), "\n") {
		var l verifyLine
		if err := json.Unmarshal([]byte(line), &l); err != nil || l.Damage {
			t.Errorf("%s: %v", line, err)
		}
	}
	// What is foreign hinders no other command.
	if code, _, said := b.run(cmdRejudge, "--site", b.site, "--archive", archive, "--yes"); code != exitOK {
		t.Errorf("rejudge beside foreign files: %s", said)
	}
	if _, err := os.Stat(filepath.Join(archive, foreign[0])); err != nil {
		t.Errorf("a foreign file is gone: %v", err)
	}
}

// Books that are damaged or gone: verify says so, rows are still read, and the next writer puts the books right.
func TestBooksDamagedOrGone(t *testing.T) {
	b, archive := rejudgedYard(t)
	want, _ := b.digests(archive)
	record := func(n string) string {
		list, err := filepath.Glob(filepath.Join(archive, "commit/*/"+n+".json"))
		if err != nil || len(list) != 1 {
			t.Fatalf("record %s: %v %v", n, list, err)
		}
		return list[0]
	}
	manifests, _ := filepath.Glob(filepath.Join(archive, "manifest/*.json"))
	if len(manifests) != 1 {
		t.Fatalf("manifests: %v", manifests)
	}
	for _, c := range []struct {
		name   string
		damage func(dir string)
		opens  bool
		says   string
	}{
		{"manifest gone, records there", func(dir string) { remove(t, dir, archive, manifests[0]) }, true, ""},
		{"manifest cut", func(dir string) { cut(t, dir, archive, manifests[0]) }, true, "manifest/"},
		{"manifest and records gone", func(dir string) {
			remove(t, dir, archive, manifests[0])
			for _, n := range []string{"000000000001", "000000000002", "000000000003"} {
				remove(t, dir, archive, record(n))
			}
		}, true, "built anew from the tree"},
		{"a record gone between two", func(dir string) {
			remove(t, dir, archive, manifests[0])
			remove(t, dir, archive, record("000000000002"))
		}, false, "comes after record 2"},
		{"a record in another's place", func(dir string) {
			remove(t, dir, archive, manifests[0])
			text, err := os.ReadFile(record("000000000001"))
			if err == nil {
				err = os.WriteFile(moved(dir, archive, record("000000000003")), text, 0o644)
			}
			if err != nil {
				t.Fatal(err)
			}
		}, false, "out of order"},
	} {
		dir := filepath.Join(t.TempDir(), "archive")
		if err := os.CopyFS(dir, os.DirFS(archive)); err != nil {
			t.Fatal(err)
		}
		c.damage(dir)
		code, out, said := b.run(cmdVerify, "--archive", dir)
		if (code == exitOK) != (c.says == "") || !strings.Contains(out+said, c.says) {
			t.Errorf("%s: verify gave %d\n%s%s", c.name, code, out, said)
		}
		a, err := store.OpenForWriting(vfs.OS{}, dir, store.Options{})
		if (err == nil) != c.opens {
			t.Errorf("%s: opening to write: %v", c.name, err)
		}
		if err != nil {
			if files := filesOf(t, dir); len(files) < len(filesOf(t, archive))-2 {
				t.Errorf("%s: files are gone: %v", c.name, files)
			}
			continue
		}
		if err := a.Close(); err != nil {
			t.Error(err)
		}
		b.write("site.yaml", yard("start", "2026-06-08", "8.62"))
		if code, _, said := b.run(cmdRejudge, "--site", b.site, "--archive", dir, "--yes"); code != exitOK {
			t.Errorf("%s: rejudge back: %s", c.name, said)
		}
		b.write("site.yaml", yard("start", "2026-06-08", "8.70"))
		if code, _, said := b.run(cmdRejudge, "--site", b.site, "--archive", dir, "--yes"); code != exitOK {
			t.Errorf("%s: rejudge: %s", c.name, said)
		}
		if code, out, said := b.run(cmdVerify, "--archive", dir); code != exitOK {
			t.Errorf("%s: after the next commits: %s%s", c.name, out, said)
		}
		if got, _ := b.digests(dir); strings.Join(got, " ") != strings.Join(want, " ") {
			t.Errorf("%s: digests %v, want %v", c.name, got, want)
		}
	}
}

func moved(dir, archive, name string) string {
	rel, _ := filepath.Rel(archive, name)
	return filepath.Join(dir, rel)
}

func remove(t *testing.T, dir, archive, name string) {
	if err := os.Remove(moved(dir, archive, name)); err != nil {
		t.Fatal(err)
	}
}

func cut(t *testing.T, dir, archive, name string) {
	if err := os.Truncate(moved(dir, archive, name), 100); err != nil {
		t.Fatal(err)
	}
}
