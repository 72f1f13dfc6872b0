package store

import (
	"math/rand/v2"
	"reflect"
	"testing"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/store/table"
	"fluxwarden/store/vfs"
)

const day0 = int64(20_625) // 2026-06-21

type batch = minute.Batch

func TestCommitAndReadBackOnRealFiles(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	dir := t.TempDir() + "/archive"
	a, err := OpenForWriting(vfs.OS{}, dir, Options{Owner: "pid 1"})
	if err != nil {
		t.Fatal(err)
	}
	j := madeDay("northmoor", day0, rng)
	batch := madeBatch("northmoor", day0, 500, rng)
	c := &Commit{Partition: 7, Epoch: 3, Positions: []Position{{"JOURNAL", 5, 99}}, RulesDigest: "abc", Program: "test",
		Raw: []RawPart{{day0, batch}}, Days: []Day{{j, false}},
		Faults:    []StationFaults{{"northmoor", []fault.Episode{madeEpisode("northmoor")}}},
		Summaries: []Summary{{"northmoor", day0, []byte(`{"gain":1}`)}}}
	r, err := a.Commit(c)
	if err != nil {
		t.Fatal(err)
	}
	if r.Number != 1 || len(r.Files) != 4 {
		t.Fatalf("record %d with %d files", r.Number, len(r.Files))
	}
	check := func(a *Archive) {
		t.Helper()
		rows := 0
		err := a.ReadMinutes("northmoor", day0*1440, day0*1440+1440, nil, func(r *Rows) error {
			rows += r.Rows
			if got, want := table.Digest(r.Table, 0, r.Rows), table.Digest(table.FromJudged(j), 0, j.Rows); got != want {
				t.Errorf("digest read back %s, of what was judged %s", got, want)
			}
			return nil
		})
		if err != nil || rows != 1440 {
			t.Errorf("%d minutes, %v", rows, err)
		}
		var back *minute.Batch
		if err := a.ReadRaw("northmoor", day0, day0, func(b *minute.Batch) error { back = b; return nil }); err != nil {
			t.Fatal(err)
		}
		want := table.ToBatch("northmoor", table.FromBatch(batch))
		if !sameBatch(back, want) {
			t.Errorf("raw read back differs")
		}
		f, err := a.Faults("northmoor")
		if err != nil || !reflect.DeepEqual(f, c.Faults[0].Episodes) {
			t.Errorf("faults %+v, %v", f, err)
		}
		s, err := a.Summaries("northmoor", day0, day0)
		if err != nil || len(s) != 1 || string(s[0].JSON) != `{"gain":1}` {
			t.Errorf("summaries %v, %v", s, err)
		}
		d, err := a.RowDigest("northmoor", day0)
		if err != nil || d != table.Digest(table.FromJudged(j), 0, j.Rows) {
			t.Errorf("row digest %q, %v", d, err)
		}
		last, ok, err := a.Last(7)
		if err != nil || !ok || last.Number != 1 || !reflect.DeepEqual(last.Positions, c.Positions) {
			t.Errorf("last %+v %v %v", last, ok, err)
		}
	}
	check(a)
	if _, err := OpenForWriting(vfs.OS{}, dir, Options{Owner: "pid 2"}); err == nil {
		t.Error("a second writer was let in")
	}
	b, err := Open(vfs.OS{}, dir)
	if err != nil {
		t.Fatal(err)
	}
	check(b)
	if err := a.Close(); err != nil {
		t.Fatal(err)
	}
	if b, err = Open(vfs.OS{}, dir); err != nil {
		t.Fatal(err)
	}
	check(b)
}

func sameBatch(a, b *minute.Batch) bool {
	if a == nil || a.Rows() != b.Rows() || len(a.Channels) != len(b.Channels) {
		return false
	}
	for i := range a.At {
		if !reflect.DeepEqual(noNaN(a.Reading(i)), noNaN(b.Reading(i))) {
			return false
		}
	}
	return true
}

func noNaN(r minute.Reading) minute.Reading {
	for i := range r.Values {
		if v := &r.Values[i]; v.SD != v.SD {
			v.SD = -1
		}
	}
	return r
}
