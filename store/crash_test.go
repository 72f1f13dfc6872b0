package store

import (
	"errors"
	"fmt"
	"math/rand/v2"
	"testing"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/store/table"
	"fluxwarden/store/vfs"
)

var errInjected = errors.New("injected fault")

// shortDay is a judged day of which few minutes are known, so that the matrix of crashes is quick.
func shortDay(day int64, rows int, seed uint64) *engine.Judged {
	j := madeDay("northmoor", day, rand.New(rand.NewPCG(seed, 1)))
	j.Rows = rows
	return j
}

// script is a life of one partition: partial days, a seal, a revision of what was sealed, faults, summaries, a compaction.
func script() []func(a *Archive) error {
	commit := func(n uint64, days []Day, rawSeed uint64) func(a *Archive) error {
		return func(a *Archive) error {
			_, err := a.Commit(&Commit{Partition: 1, Base: n, Epoch: 1, Positions: []Position{{"JOURNAL", 1, n + 1}}, Days: days,
				Raw:       []RawPart{{day0, madeBatch("northmoor", day0, 5, rand.New(rand.NewPCG(rawSeed, 9)))}},
				Faults:    []StationFaults{{"northmoor", []fault.Episode{madeEpisode("northmoor")}}},
				Summaries: []Summary{{"northmoor", day0, []byte(fmt.Sprint(n))}}})
			return err
		}
	}
	return []func(a *Archive) error{
		commit(0, []Day{{shortDay(day0, 3, 1), false}}, 1),
		commit(1, []Day{{shortDay(day0, 6, 2), true}, {shortDay(day0+1, 2, 3), false}}, 2),
		commit(2, []Day{{shortDay(day0, 6, 4), true}}, 3),
		func(a *Archive) error { return a.Compact(1, "northmoor", monthOf(day0)) },
		commit(4, []Day{{shortDay(day0+1, 4, 5), true}}, 4),
	}
}

// picture is everything that a reader can get out of the archive, as one text, and how many commits it holds.
func picture(t *testing.T, a *Archive) (string, uint64) {
	t.Helper()
	last, ok, err := a.Last(1)
	if err != nil {
		t.Fatal(err)
	}
	if !ok {
		return "empty", 0
	}
	text := fmt.Sprint(last.Number, last.Positions, "\n")
	check := func(err error) {
		if err != nil {
			t.Fatal(err)
		}
	}
	check(a.ReadMinutes("northmoor", 0, 1<<40, nil, func(r *Rows) error {
		text += table.Digest(r.Table, 0, r.Rows) + "\n"
		return nil
	}))
	days, err := a.RawDays("northmoor")
	check(err)
	text += fmt.Sprint(days, "\n")
	check(a.ReadRaw("northmoor", day0-1, day0+9, func(b *batch) error { text += fmt.Sprintf("%d readings\n", b.Rows()); return nil }))
	f, err := a.Faults("northmoor")
	check(err)
	s, err := a.Summaries("northmoor", 0, 1<<30)
	check(err)
	return text + fmt.Sprint(f, s), last.Number
}

// TestEveryCrashIsAllOrNothing stops the power before every operation of the script, with nothing, half or all of what is unsynced surviving, opens what
// is left, and holds it against the archive of a run without a crash: it must be as after commit n or n+1, whole, with no file that does not belong.
func TestEveryCrashIsAllOrNothing(t *testing.T) {
	want, _ := cleanRun(t)
	type crash struct {
		name  string
		clone *vfs.Mem
		done  int
	}
	var crashes []crash
	mem, done := vfs.NewMem(), 0
	f := &vfs.Failing{FS: mem, Fail: func(op, name string, i int) error {
		for _, share := range []float64{0, 0.5, 1} {
			rng := rand.New(rand.NewPCG(uint64(i), uint64(share*10)))
			crashes = append(crashes, crash{fmt.Sprintf("share %v, crash before operation %d, %s %s", share, i, op, name), mem.CrashClone(rng, share), done})
		}
		return nil
	}}
	a, err := OpenForWriting(f, "/archive", Options{CheckpointEvery: 2})
	if err != nil {
		t.Fatal(err)
	}
	for _, step := range script() {
		if err := step(a); err != nil {
			t.Fatal(err)
		}
		done++
	}
	seen := map[string]bool{} // between two syncs most crashes leave the same
	for i, c := range crashes {
		key := fmt.Sprint(c.done, fingerprint(t, c.clone))
		if seen[key] {
			continue
		}
		seen[key] = true
		checkSurvivor(t, c.name, c.clone, want, c.done, i%11 == 0)
	}
}

// fingerprint tells two file systems apart by what is in them.
func fingerprint(t *testing.T, m *vfs.Mem) string {
	text := ""
	if err := newArchive(m, "/archive").walkDir(".", func(name string) error {
		b, err := vfs.ReadFileBytes(m, "/archive/"+name)
		text += name + sha(b)
		return err
	}); err != nil {
		t.Fatal(err)
	}
	return sha([]byte(text))
}

// cleanRun gives the pictures after 0, 1, … commits and the number of operations.
func cleanRun(t *testing.T) (pictures []string, operations int) {
	f := &vfs.Failing{FS: vfs.NewMem()}
	a, err := OpenForWriting(f, "/archive", Options{CheckpointEvery: 2})
	if err != nil {
		t.Fatal(err)
	}
	pictures = append(pictures, "empty")
	for i, step := range script() {
		if err := step(a); err != nil {
			t.Fatalf("step %d: %v", i, err)
		}
		count := f.Count()
		p, n := picture(t, a)
		if n != uint64(i+1) {
			t.Fatalf("step %d is record %d", i, n)
		}
		pictures = append(pictures, p)
		operations += f.Count() - count // those of looking
	}
	return pictures, f.Count() - operations
}

// play runs the script until it fails and says how many steps were answered well.
func play(f vfs.FS) int {
	a, err := OpenForWriting(f, "/archive", Options{CheckpointEvery: 2})
	if err != nil {
		return 0
	}
	for i, step := range script() {
		if step(a) != nil {
			return i
		}
	}
	return len(script())
}

func checkSurvivor(t *testing.T, name string, mem *vfs.Mem, want []string, done int, goOn bool) {
	t.Helper()
	if ok, _ := vfs.Exists(mem, "/archive/archive.json"); ok { // a reader before any repair sees a whole commit too
		a, err := Open(mem, "/archive")
		if err != nil {
			t.Fatalf("%s: open to read: %v", name, err)
		}
		compare(t, name+", reader", a, want, done)
	}
	a, err := OpenForWriting(mem, "/archive", Options{})
	if err != nil {
		t.Fatalf("%s: open: %v", name, err)
	}
	n := compare(t, name, a, want, done)
	found, err := a.Verify(nil)
	if err != nil || len(found) > 0 {
		t.Fatalf("%s: verify: %v %v", name, found, err)
	}
	if !goOn {
		return
	}
	for i, step := range script()[n:] {
		if err := step(a); err != nil {
			t.Fatalf("%s: going on with step %d: %v", name, n+i, err)
		}
	}
	if p, _ := picture(t, a); p != want[len(want)-1] {
		t.Fatalf("%s: went on to\n%s\nwant\n%s", name, p, want[len(want)-1])
	}
}

func compare(t *testing.T, name string, a *Archive, want []string, done int) int {
	t.Helper()
	p, number := picture(t, a)
	n := int(number)
	if n < done || n > done+1 {
		t.Fatalf("%s: %d commits survive, %d were answered", name, n, done)
	}
	if p != want[n] {
		t.Fatalf("%s: after %d commits\n%s\nwant\n%s", name, n, p, want[n])
	}
	return n
}

// TestEveryFaultIsReported fails each operation of the script once, as a full disk or a bad sector would, and goes on with a working disk and the archive
// opened anew. A step that fails may be there or not; one that was answered is there.
func TestEveryFaultIsReported(t *testing.T) {
	want, total := cleanRun(t)
	skip := 0
	if testing.Short() {
		skip = 6
	}
	for at := 0; at < total; at += 1 + skip {
		mem := vfs.NewMem()
		f := &vfs.Failing{FS: mem, Fail: func(_, _ string, i int) error {
			if i == at {
				return errInjected
			}
			return nil
		}}
		done := play(f)
		checkSurvivor(t, fmt.Sprintf("fault at %d", at), mem.CrashClone(rand.New(rand.NewPCG(1, uint64(at))), 0.5), want, done, at%11 == 0)
	}
}
