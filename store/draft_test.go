package store

import (
	"errors"
	"fmt"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"fluxwarden/qc/fault"
	"fluxwarden/store/table"
	"fluxwarden/store/vfs"
)

// drafted makes a commit bit by bit on the archive of the script: a day of the month that is one file, a day of its own file, faults.
func drafted(a *Archive) error {
	last, _, err := a.Last(1)
	if err != nil {
		return err
	}
	d, err := a.Begin(&Commit{Partition: 1, Base: last.Number, Epoch: 1, RulesDigest: "new", Reason: "a test"})
	if err != nil {
		return err
	}
	month := NewMonth("northmoor", monthOf(day0))
	other := NewMonth("northmoor", monthOf(day0+40))
	for _, step := range []func() error{
		func() error { return month.Add(shortDay(day0, 6, 44)) },
		func() error { return other.Add(shortDay(day0+40, 3, 45)) },
		func() error { return d.Add(&Commit{Revisions: []*Month{month}}) },
		func() error { return d.Add(&Commit{Revisions: []*Month{other}}) },
		func() error {
			return d.Add(&Commit{Faults: []StationFaults{{"northmoor", []fault.Episode{madeEpisode("northmoor")}}},
				Summaries: []Summary{{"northmoor", day0 + 40, []byte("7")}}})
		},
	} {
		if err := step(); err != nil {
			d.Drop()
			return err
		}
	}
	_, err = d.Finish()
	return err
}

// A draft that is failed at any of its operations, with the power gone afterwards, leaves the archive as it was or as it should be.
func TestDraftIsAllOrNothing(t *testing.T) {
	base, _ := written(t)
	look := func(m *vfs.Mem) string {
		a, err := OpenForWriting(m, "/archive", Options{})
		if err != nil {
			t.Fatal(err)
		}
		defer a.Close()
		if found, err := a.Verify(nil); err != nil || len(found) > 0 {
			t.Fatalf("verify: %v %v", found, err)
		}
		text, _ := picture(t, a)
		return text
	}
	before := look(base.CrashClone(rand.New(rand.NewPCG(1, 1)), 1))
	good := base.CrashClone(rand.New(rand.NewPCG(1, 1)), 1)
	count := &vfs.Failing{FS: good}
	a, err := OpenForWriting(count, "/archive", Options{})
	if err != nil {
		t.Fatal(err)
	}
	from := count.Count()
	if err := drafted(a); err != nil {
		t.Fatal(err)
	}
	to := count.Count()
	if err := a.Close(); err != nil {
		t.Fatal(err)
	}
	after := look(good)
	if before == after {
		t.Fatal("the draft changes nothing")
	}
	for at := from; at < to; at++ {
		m := base.CrashClone(rand.New(rand.NewPCG(1, 1)), 1)
		f := &vfs.Failing{FS: m, Fail: func(_, _ string, i int) error {
			if i == at {
				return errInjected
			}
			return nil
		}}
		a, err := OpenForWriting(f, "/archive", Options{})
		if err != nil {
			t.Fatal(err)
		}
		failed := drafted(a)
		got := look(m.CrashClone(rand.New(rand.NewPCG(1, uint64(at))), 0.5))
		if got != before && got != after || failed == nil && got != after {
			t.Fatalf("fault at %d (%v):\n%s\nwant\n%s\nor\n%s", at, failed, got, before, after)
		}
	}
}

func TestDraftRefusesTheSameFileTwice(t *testing.T) {
	base, _ := written(t)
	a, err := OpenForWriting(base, "/archive", Options{})
	if err != nil {
		t.Fatal(err)
	}
	d, err := a.Begin(&Commit{Partition: 1, Base: 5})
	if err != nil {
		t.Fatal(err)
	}
	if !d.Empty() {
		t.Error("not empty at first")
	}
	if err := d.Add(&Commit{Summaries: []Summary{{"northmoor", day0, []byte("1")}}}); err != nil {
		t.Fatal(err)
	}
	if err := d.Add(&Commit{Summaries: []Summary{{"northmoor", day0 + 1, []byte("2")}}}); err == nil || !strings.Contains(err.Error(), "twice") {
		t.Errorf("a month's summaries in two parts: %v", err)
	}
	d.Drop()
	if _, err := a.Begin(&Commit{Partition: 1, Base: 4}); !errors.Is(err, ErrLostPartition) {
		t.Errorf("an old base: %v", err)
	}
	if found, err := a.Verify(nil); err != nil || len(found) > 0 {
		t.Errorf("after it was dropped: %v %v", found, err)
	}
	if n := strings.Count(listing(t, base), "staging/"); n != 0 {
		t.Errorf("%d files are left in staging", n)
	}
}

// Days keep the commit that their rows are of through compaction and through revisions of other days; what was sealed stays to be looked at.
func TestRevisionsOfADay(t *testing.T) {
	m := vfs.NewMem()
	a, err := OpenForWriting(m, "/archive", Options{})
	if err != nil {
		t.Fatal(err)
	}
	commit := func(base uint64, rules string, raw bool, days ...Day) {
		t.Helper()
		c := &Commit{Partition: 1, Base: base, RulesDigest: rules, Program: "p" + rules, Days: days}
		if raw {
			c.Raw = []RawPart{{day0, madeBatch("northmoor", day0, 3, rand.New(rand.NewPCG(base, 1)))}}
		}
		if _, err := a.Commit(c); err != nil {
			t.Fatal(err)
		}
	}
	commit(0, "a", true, Day{shortDay(day0, 5, 1), true}, Day{shortDay(day0+1, 5, 2), true})
	commit(1, "a", true, Day{shortDay(day0, 6, 3), true})            // late readings
	if err := a.Compact(1, "northmoor", monthOf(day0)); err != nil { // commit 3
		t.Fatal(err)
	}
	commit(3, "b", false, Day{shortDay(day0, 6, 4), true}) // new rules
	commit(4, "b", false, Day{shortDay(day0, 6, 4), true}) // no change
	want := map[int64]string{day0: "[1 a  true] [2 a more readings true] [4 b new rules false] ", day0 + 1: "[1 a  false] "}
	for day, w := range want {
		list, err := a.Revisions("northmoor", day)
		if err != nil {
			t.Fatal(err)
		}
		got := ""
		for _, r := range list {
			got += fmt.Sprint([]any{r.Commit, r.RulesDigest, r.Reason, r.Superseded}, " ")
			rows, err := a.RevisionRows(&r, "northmoor", day)
			if err != nil {
				t.Fatal(err)
			}
			if d := table.Digest(rows.Table, 0, rows.Rows); d != r.Digest || r.Program != "p"+r.RulesDigest {
				t.Errorf("%s, commit %d: digest %s, rows have %s; program %s", dayName(day), r.Commit, r.Digest, d, r.Program)
			}
		}
		if got != w {
			t.Errorf("%s: %s, want %s", dayName(day), got, w)
		}
	}
	if list, err := a.Revisions("northmoor", day0+99); err != nil || len(list) != 0 {
		t.Errorf("a day without rows: %v %v", list, err)
	}
	if days, err := a.RawDays("northmoor"); err != nil || !slices.Equal(days, []int64{day0}) {
		t.Errorf("%v %v", days, err)
	}
}
