package store

import (
	"errors"
	"fmt"
	"io"
	"math/rand/v2"
	"path"
	"strings"
	"testing"

	"fluxwarden/qc/minute"
	"fluxwarden/store/table"
	"fluxwarden/store/vfs"
)

// unlocked lets two writers in, as two hosts over a network file system could be.
type unlocked struct{ *vfs.Mem }

func (unlocked) Lock(string, string) (io.Closer, error) { return io.NopCloser(nil), nil }

func TestTheLoserChangesNothing(t *testing.T) {
	fs := unlocked{vfs.NewMem()}
	open := func() *Archive {
		a, err := OpenForWriting(fs, "/archive", Options{})
		if err != nil {
			t.Fatal(err)
		}
		return a
	}
	first, second := open(), open()
	if err := script()[0](first); err != nil {
		t.Fatal(err)
	}
	before := fs.CrashClone(rand.New(rand.NewPCG(1, 1)), 1)
	err := script()[0](second)
	if !errors.Is(err, ErrLostPartition) {
		t.Fatalf("the second of two owners got %v", err)
	}
	want, got := listing(t, before), listing(t, fs.Mem)
	if want != got {
		t.Errorf("the loser changed the archive from\n%s\nto\n%s", want, got)
	}
	if err := script()[1](first); err != nil {
		t.Errorf("the winner's next commit: %v", err)
	}
	if err := script()[2](second); !errors.Is(err, ErrLostPartition) {
		t.Errorf("a base that it does not stand on: %v", err)
	}
	_, err = first.Commit(&Commit{Partition: 1, Base: 1})
	if !errors.Is(err, ErrLostPartition) {
		t.Errorf("an old base: %v", err)
	}
}

func listing(t *testing.T, m *vfs.Mem) string {
	var b strings.Builder
	a := newArchive(m, "/archive")
	for _, dir := range []string{"raw", "minutes", "faults", "state", "commit", "staging", "superseded", "manifest"} {
		if err := a.walkDir(dir, func(name string) error { fmt.Fprintln(&b, name); return nil }); err != nil {
			t.Fatal(err)
		}
	}
	return b.String()
}

// written makes an archive of the whole script.
func written(t *testing.T) (*vfs.Mem, []string) {
	m := vfs.NewMem()
	a, err := OpenForWriting(m, "/archive", Options{})
	if err != nil {
		t.Fatal(err)
	}
	for _, step := range script() {
		if err := step(a); err != nil {
			t.Fatal(err)
		}
	}
	if err := a.Close(); err != nil {
		t.Fatal(err)
	}
	var files []string
	for _, dir := range []string{"raw", "minutes", "faults", "state", "commit"} {
		if err := a.walkDir(dir, func(name string) error { files = append(files, name); return nil }); err != nil {
			t.Fatal(err)
		}
	}
	return m, files
}

func overwrite(t *testing.T, m *vfs.Mem, name string, change func([]byte) []byte) {
	t.Helper()
	b, err := vfs.ReadFileBytes(m, path.Join("/archive", name))
	if err != nil {
		t.Fatal(err)
	}
	f, err := m.Create(path.Join("/archive", name))
	if err != nil {
		t.Fatal(err)
	}
	if _, err := f.Write(change(append([]byte(nil), b...))); err != nil {
		t.Fatal(err)
	}
}

// One flipped bit, a cut, an emptied or a lost file of any sort is found and named, and nothing panics.
func TestVerifyNamesEveryDamage(t *testing.T) {
	m, files := written(t)
	rng := rand.New(rand.NewPCG(5, 5))
	damages := map[string]func([]byte) []byte{
		"a flipped bit": func(b []byte) []byte { b[rng.IntN(len(b))] ^= 1 << rng.IntN(8); return b },
		"a cut":         func(b []byte) []byte { return b[:rng.IntN(len(b))] },
		"emptied":       func([]byte) []byte { return nil },
	}
	for _, name := range files {
		for what, damage := range damages {
			clone := m.CrashClone(rng, 1)
			overwrite(t, clone, name, damage)
			a, err := Open(clone, "/archive")
			if err != nil { // a record that the manifest does not cover says so at once
				if !strings.Contains(err.Error(), name) {
					t.Errorf("%s, %s: opening says %v", name, what, err)
				}
				continue
			}
			found, err := a.Verify(nil)
			if err != nil {
				t.Fatal(err)
			}
			named := false
			for _, f := range found {
				named = named || f.Path == name || path.Dir(name) == "commit/01" && path.Dir(f.Path) == "commit/01"
			}
			if !named {
				t.Errorf("%s, %s: found only %v", name, what, found)
			}
			_ = a.ReadMinutes("northmoor", 0, 1<<40, nil, func(*Rows) error { return nil })
			_ = a.ReadRaw("northmoor", 0, 1<<30, func(*minute.Batch) error { return nil })
			_, _ = a.Faults("northmoor")
			_, _ = a.Summaries("northmoor", 0, 1<<30)
		}
	}
}

func TestForeignFilesAreNamedAndSetAsideOnlyWhenAsked(t *testing.T) {
	m, _ := written(t)
	month := "minutes/station=northmoor/month=" + monthOf(day0)
	for _, name := range []string{month + "/notes.txt", month + "/empty.parquet", month + "/other.parquet"} {
		f, err := m.Create("/archive/" + name)
		if err != nil {
			t.Fatal(err)
		}
		if !strings.Contains(name, "empty") {
			if _, err := f.Write([]byte("not ours, not Parquet")); err != nil {
				t.Fatal(err)
			}
		}
	}
	a, err := OpenForWriting(m, "/archive", Options{})
	if err != nil {
		t.Fatal(err)
	}
	found, err := a.Verify(nil)
	if err != nil || len(found) != 3 {
		t.Fatalf("%v %v", found, err)
	}
	for _, f := range found {
		if f.Fatal {
			t.Errorf("%s: called fatal", f)
		}
		if err := a.SetAside(f.Path, f.Problem); err != nil {
			t.Error(err)
		}
		if ok, _ := vfs.Exists(m, "/archive/damaged/"+f.Path); !ok {
			t.Errorf("%s is not under damaged/", f.Path)
		}
	}
	if found, err = a.Verify(nil); err != nil || len(found) != 0 {
		t.Errorf("after setting aside: %v %v", found, err)
	}
}

// Without commit records and manifests the books are built anew from the tree.
func TestBooksAreRebuiltFromTheTree(t *testing.T) {
	m, _ := written(t)
	before, err := Open(m, "/archive")
	if err != nil {
		t.Fatal(err)
	}
	want, _ := picture(t, before)
	a := newArchive(m, "/archive")
	for _, dir := range []string{"commit", "manifest"} {
		if err := a.walkDir(dir, func(name string) error { return m.Remove("/archive/" + name) }); err != nil {
			t.Fatal(err)
		}
	}
	b, err := OpenForWriting(m, "/archive", Options{})
	if err != nil {
		t.Fatal(err)
	}
	if _, ok, _ := b.Last(1); ok {
		t.Error("a record out of nothing")
	}
	b.parts[1].last, b.parts[1].have = before.parts[1].last, true // only so that the pictures have the same first line
	if got, _ := picture(t, b); got != want {
		t.Errorf("rebuilt\n%s\nwant\n%s", got, want)
	}
	b.parts[1].last, b.parts[1].have = Record{}, false
	if err := script()[0](b); err != nil {
		t.Errorf("a commit on the rebuilt books: %v", err)
	}
}

func TestANewerArchiveIsRefused(t *testing.T) {
	m, _ := written(t)
	overwrite(t, m, "archive.json", func([]byte) []byte { return []byte(`{"format": 99}`) })
	if _, err := Open(m, "/archive"); err == nil || !strings.Contains(err.Error(), "use a newer program") {
		t.Errorf("format 99: %v", err)
	}
	if _, err := Open(m, "/elsewhere"); err == nil || !strings.Contains(err.Error(), "no archive.json") {
		t.Errorf("no archive: %v", err)
	}
}

// A month written at once, day files compacted, and a month changed by a later revision of one day: the same rows have the same digests.
func TestMonthsKeepDigests(t *testing.T) {
	m := vfs.NewMem()
	a, err := OpenForWriting(m, "/archive", Options{})
	if err != nil {
		t.Fatal(err)
	}
	month := NewMonth("a", monthOf(day0))
	var days []Day
	want := map[int64]string{}
	for d := day0; d < day0+4; d++ {
		j := madeDay("a", d, rand.New(rand.NewPCG(uint64(d), 1)))
		if err := month.Add(j); err != nil {
			t.Fatal(err)
		}
		want[d] = table.Digest(table.FromJudged(j), 0, j.Rows)
		k := *j
		k.Station = "b"
		days = append(days, Day{&k, true})
	}
	if _, err := a.Commit(&Commit{Partition: 1, Months: []*Month{month}}); err != nil {
		t.Fatal(err)
	}
	if _, err := a.Commit(&Commit{Partition: 2, Days: days}); err != nil {
		t.Fatal(err)
	}
	if err := a.Compact(2, "b", monthOf(day0)); err != nil {
		t.Fatal(err)
	}
	changed := madeDay("b", day0+1, rand.New(rand.NewPCG(77, 1)))
	if _, err := a.Commit(&Commit{Partition: 2, Base: 2, Days: []Day{{changed, true}}}); err != nil {
		t.Fatal(err)
	}
	for d, w := range want {
		if got, err := a.RowDigest("a", d); err != nil || got != w {
			t.Errorf("month of a, %s: %s, %v, want %s", dayName(d), got, err, w)
		}
		if d == day0+1 {
			w = table.Digest(table.FromJudged(changed), 0, changed.Rows)
		}
		if got, err := a.RowDigest("b", d); err != nil || got != w {
			t.Errorf("month of b, %s: %s, %v, want %s", dayName(d), got, err, w)
		}
	}
	if found, err := a.Verify(nil); err != nil || len(found) > 0 {
		t.Errorf("verify: %v %v", found, err)
	}
	if n := strings.Count(listing(t, m), "superseded/minutes/station=b"); n != 1 {
		t.Errorf("%d superseded files of b, want the month before its day changed", n)
	}
}

// Part files of readings are written as one from time to time; no reading is lost or doubled by it.
func TestRawPartsAreMerged(t *testing.T) {
	m := vfs.NewMem()
	a, err := OpenForWriting(m, "/archive", Options{})
	if err != nil {
		t.Fatal(err)
	}
	const commits = 2*rawPartsMax + 3
	for n := range uint64(commits) {
		b := madeBatch("a", day0, 3, rand.New(rand.NewPCG(n, 1)))
		if _, err := a.Commit(&Commit{Partition: 1, Base: n, Raw: []RawPart{{day0, b}}}); err != nil {
			t.Fatal(err)
		}
	}
	rows, last := 0, minute.Stamp(0)
	if err := a.ReadRaw("a", day0, day0, func(b *minute.Batch) error {
		for _, at := range b.At {
			if at < last {
				t.Errorf("%d after %d", at, last)
			}
			last = at
		}
		rows += b.Rows()
		return nil
	}); err != nil || rows != 3*commits {
		t.Errorf("%d readings, %v; want %d", rows, err, 3*commits)
	}
	if n := len(a.parts[1].current("a", TableRaw)); n > rawPartsMax {
		t.Errorf("%d part files", n)
	}
}
