package broker

import (
	"context"
	"errors"
	"fmt"
	"testing"
	"time"
)

func (b *Broker) put(t *testing.T, partition int, payload string) {
	t.Helper()
	if _, err := b.JS.Publish(t.Context(), JournalSubject(partition), []byte(payload)); err != nil {
		t.Fatal(err)
	}
}

func openJournal(t *testing.T, b *Broker) *Journal {
	t.Helper()
	j, err := b.Journal(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	return j
}

func TestTheJournalIsReadFromAPositionByPartition(t *testing.T) {
	_, b := start(t, t.TempDir())
	j := openJournal(t, b)
	if s, err := j.State(t.Context()); err != nil || s.FirstSeq != 1 || s.LastSeq != 0 || s.Created.IsZero() || s.BytesMax != 16<<20 {
		t.Fatalf("a new journal: %+v, %v", s, err)
	}
	for i := range 30 {
		b.put(t, i%3, fmt.Sprint(i+1))
	}
	r, err := j.Read(t.Context(), []int{2, 0, 2}, 7)
	if err != nil {
		t.Fatal(err)
	}
	defer r.Close()
	for seq := 7; seq <= 30; seq++ {
		if (seq-1)%3 == 1 {
			continue
		}
		e, err := r.Next(t.Context())
		if err != nil || e.Seq != uint64(seq) || string(e.Payload) != fmt.Sprint(seq) || e.Partition != (seq-1)%3 || e.Stored.IsZero() {
			t.Fatalf("wanted %d: %+v, %v", seq, e, err)
		}
		if (e.Pending == 0) != (seq == 30) {
			t.Errorf("entry %d has %d behind it", seq, e.Pending)
		}
	}
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	if _, err := r.Next(ctx); !errors.Is(err, context.Canceled) {
		t.Errorf("at the end: %v", err)
	}
	b.put(t, 0, "later")
	if e, err := r.Next(t.Context()); err != nil || string(e.Payload) != "later" {
		t.Errorf("after a wait: %+v, %v", e, err)
	}
}

func TestAPurgedPositionIsAGapAndReadingGoesOn(t *testing.T) {
	_, b := start(t, t.TempDir())
	j := openJournal(t, b)
	for range 10 {
		b.put(t, 5, "x")
	}
	if err := j.Purge(t.Context(), 6); err != nil {
		t.Fatal(err)
	}
	r, err := j.Read(t.Context(), []int{5}, 3)
	if err != nil {
		t.Fatal(err)
	}
	defer r.Close()
	var gap *Gap
	if _, err := r.Next(t.Context()); !errors.As(err, &gap) || *gap != (Gap{3, 6}) {
		t.Fatalf("got %v", err)
	}
	if e, err := r.Next(t.Context()); err != nil || e.Seq != 7 {
		t.Fatalf("behind the gap: %+v, %v", e, err)
	}
	// Of other partitions: no entry of 5 is missing between 8 and the next, so there is no gap.
	other, err := j.Read(t.Context(), []int{6}, 8)
	if err != nil {
		t.Fatal(err)
	}
	defer other.Close()
	b.put(t, 6, "y")
	if e, err := other.Next(t.Context()); err != nil || e.Seq != 11 {
		t.Errorf("got %+v, %v", e, err)
	}
}

func TestAStreamMadeAnewIsNoticed(t *testing.T) {
	_, b := start(t, t.TempDir())
	j := openJournal(t, b)
	b.put(t, 1, "old")
	before, err := j.State(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	r, err := j.Read(t.Context(), []int{1}, 2)
	if err != nil {
		t.Fatal(err)
	}
	defer r.Close()
	if err := b.JS.DeleteStream(t.Context(), JournalStream); err != nil {
		t.Fatal(err)
	}
	if err := b.EnsureStreams(t.Context(), testStreams()); err != nil {
		t.Fatal(err)
	}
	after, err := j.State(t.Context())
	if err != nil || after.Created.Equal(before.Created) || after.LastSeq != 0 {
		t.Errorf("%+v, then %+v, %v", before, after, err)
	}
	// The consumer went with the stream. The reader may say that it is broken, or that the stream is another; never may it
	// give the new entries under the old numbers.
	for range 3 {
		b.put(t, 1, "new")
	}
	r.looked = time.Now().Add(-2 * lookEvery)
	ctx, cancel := context.WithTimeout(t.Context(), 100*time.Millisecond)
	defer cancel()
	for i := 0; ; i++ {
		e, err := r.Next(ctx)
		if err == nil {
			t.Fatalf("gave %+v", e)
		}
		if !errors.Is(err, context.DeadlineExceeded) {
			return
		}
		if i > 0 {
			t.Fatal("nothing was noticed")
		}
	}
}

func TestReadingGoesOnBehindARestart(t *testing.T) {
	dir, port := t.TempDir(), freePort(t)
	settings := EmbeddedSettings{StoreDir: dir, Listen: true, Port: port, StoreBytes: testStreams().Bytes()}
	e, err := StartEmbedded(t.Context(), settings)
	if err != nil {
		t.Fatal(err)
	}
	b, err := Connect(ConnectSettings{URL: e.URL()})
	if err != nil {
		t.Fatal(err)
	}
	defer b.Close()
	if err := b.EnsureStreams(t.Context(), testStreams()); err != nil {
		t.Fatal(err)
	}
	j := openJournal(t, b)
	r, err := j.Read(t.Context(), []int{9}, 1)
	if err != nil {
		t.Fatal(err)
	}
	defer func() { r.Close() }()
	next := uint64(1)
	for round := range 3 {
		for range 5 {
			b.put(t, 9, "x")
		}
		for range 5 {
			ent, err := r.Next(t.Context())
			if err != nil { // the consumer was lost: open again
				r.Close()
				if r, err = j.Read(t.Context(), []int{9}, next); err == nil {
					ent, err = r.Next(t.Context())
				}
				if err != nil {
					t.Fatalf("round %d: %v", round, err)
				}
			}
			if ent.Seq != next {
				t.Fatalf("round %d: got entry %d, want %d", round, ent.Seq, next)
			}
			next++
		}
		e.Stop()
		if e, err = StartEmbedded(t.Context(), settings); err != nil {
			t.Fatal(err)
		}
		if err := b.EnsureStreams(t.Context(), testStreams()); err != nil {
			t.Fatal(err)
		}
	}
	e.Stop()
}

func TestOldEntriesArePurgedByTheirTime(t *testing.T) {
	_, b := start(t, t.TempDir())
	j := openJournal(t, b)
	for range 20 {
		b.put(t, 0, "x")
	}
	at, there, err := j.StoredAt(t.Context(), 12)
	if err != nil || !there {
		t.Fatal(there, err)
	}
	if _, there, err := j.StoredAt(t.Context(), 99); err != nil || there {
		t.Errorf("an entry that is not there: %v, %v", there, err)
	}
	for _, c := range []struct {
		upTo   uint64
		before time.Time
		first  uint64
	}{{5, at, 6}, {3, at, 6}, {100, at, 12}, {100, at, 12}, {15, at.Add(time.Hour), 16}, {0, at.Add(time.Hour), 16}, {100, at.Add(time.Hour), 21}, {100, at.Add(time.Hour), 21}} {
		if err := j.PurgeBefore(t.Context(), c.upTo, c.before); err != nil {
			t.Fatal(err)
		}
		if s, err := j.State(t.Context()); err != nil || s.FirstSeq != c.first {
			t.Errorf("up to %d: first is %d, want %d (%v)", c.upTo, s.FirstSeq, c.first, err)
		}
	}
}
