package broker

import (
	"context"
	"errors"
	"fmt"
	"net"
	"strings"
	"testing"
	"time"

	"github.com/nats-io/nats.go/jetstream"
)

// Where these stations lie is written in every archive: it never changes. The hash was worked out apart, in Python.
func TestPartitionsAreFixedForEver(t *testing.T) {
	for station, want := range map[string]int{"": 17, "a": 34, "northmoor": 31, "southmoor": 20, "station-1": 31, "station-2": 57, "s0": 49, "s1999": 29} {
		if got := PartitionOf(station); got != want {
			t.Errorf("%q is in partition %d, want %d", station, got, want)
		}
	}
	var count [Partitions]int
	for i := range 6400 {
		count[PartitionOf(fmt.Sprintf("station-%d", i))]++
	}
	for p, n := range count {
		if n < 60 || n > 145 { // 100 expected; four and a half standard deviations
			t.Errorf("partition %d has %d of 6400 stations", p, n)
		}
	}
}

func TestJournalSubjects(t *testing.T) {
	for p := range Partitions {
		if got, ok := partitionOfSubject(JournalSubject(p)); !ok || got != p {
			t.Errorf("partition %d: %s is read as %d", p, JournalSubject(p), got)
		}
	}
	for _, s := range []string{"journal.64", "journal.7", "journal.-1", "journal.007", "journal.xx", "rad.v1.x", "journal."} {
		if _, ok := partitionOfSubject(s); ok {
			t.Errorf("%s was taken for a partition", s)
		}
	}
}

func testStreams() StreamSettings {
	return StreamSettings{JournalBytes: 16 << 20, RefusedBytes: 1 << 20, ChangesBytes: 1 << 20, FindingsBytes: 1 << 20, LeaseTTL: time.Minute}
}

func start(t *testing.T, dir string) (*Embedded, *Broker) {
	t.Helper()
	e, err := StartEmbedded(t.Context(), EmbeddedSettings{StoreDir: dir, StoreBytes: testStreams().Bytes()})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(e.Stop)
	b, err := Connect(ConnectSettings{Embedded: e})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(b.Close)
	if err := b.EnsureStreams(t.Context(), testStreams()); err != nil {
		t.Fatal(err)
	}
	return e, b
}

func TestAStoreIsForOneProcessAndOutlivesIt(t *testing.T) {
	dir := t.TempDir()
	e, b := start(t, dir)
	b.put(t, 3, "kept")
	before, err := openJournal(t, b).State(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	if _, err := StartEmbedded(t.Context(), EmbeddedSettings{StoreDir: dir, StoreBytes: 1 << 30}); err == nil || !strings.Contains(err.Error(), "in use by process") {
		t.Errorf("a second server on the store: %v", err)
	}
	b.Close()
	e.Stop()
	_, b = start(t, dir)
	if after, err := openJournal(t, b).State(t.Context()); err != nil || after != before {
		t.Errorf("%+v, then %+v, %v", before, after, err)
	}
}

func TestStreamsAreCheckedAndTheirBoundsFollow(t *testing.T) {
	_, b := start(t, t.TempDir())
	s := testStreams()
	s.JournalBytes = 8 << 20
	if err := b.EnsureStreams(t.Context(), s); err != nil {
		t.Fatal(err)
	}
	if state, err := openJournal(t, b).State(t.Context()); err != nil || state.BytesMax != 8<<20 {
		t.Errorf("%+v, %v", state, err)
	}
	if err := b.JS.DeleteStream(t.Context(), JournalStream); err != nil {
		t.Fatal(err)
	}
	for _, wrong := range []jetstream.StreamConfig{
		{Name: JournalStream, Subjects: []string{"journal.*"}, Storage: jetstream.MemoryStorage, Discard: jetstream.DiscardNew, MaxBytes: 1 << 20},
		{Name: JournalStream, Subjects: []string{"journal.*"}, Discard: jetstream.DiscardOld, MaxBytes: 1 << 20},
		{Name: JournalStream, Subjects: []string{"other"}, Discard: jetstream.DiscardNew, MaxBytes: 1 << 20},
	} {
		if _, err := b.JS.CreateStream(t.Context(), wrong); err != nil {
			t.Fatal(err)
		}
		if err := b.EnsureStreams(t.Context(), s); err == nil || !strings.Contains(err.Error(), "stream JOURNAL: it is there") {
			t.Errorf("%v was taken: %v", wrong.Subjects, err)
		}
		if err := b.JS.DeleteStream(t.Context(), JournalStream); err != nil {
			t.Fatal(err)
		}
	}
}

func TestAStoreThatIsTooSmallIsSaid(t *testing.T) {
	e, err := StartEmbedded(t.Context(), EmbeddedSettings{StoreDir: t.TempDir(), StoreBytes: 1 << 20})
	if err != nil {
		t.Fatal(err)
	}
	defer e.Stop()
	b, err := Connect(ConnectSettings{Embedded: e})
	if err != nil {
		t.Fatal(err)
	}
	defer b.Close()
	if err := b.EnsureStreams(t.Context(), testStreams()); err == nil || !strings.Contains(err.Error(), "make the store larger") {
		t.Errorf("got %v", err)
	}
}

func TestWhatIsPublishedHasAStream(t *testing.T) {
	_, b := start(t, t.TempDir())
	for _, subject := range []string{FindingSubject("northmoor"), ChangeSubject(7)} {
		if err := b.Publish(t.Context(), subject, []byte("x")); err != nil {
			t.Error(err)
		}
	}
	ctx, cancel := context.WithTimeout(t.Context(), time.Second)
	defer cancel()
	if err := b.Publish(ctx, "nowhere", nil); !Unreachable(err) {
		t.Errorf("a subject without a stream: %v", err)
	}
}

func TestAPortInUseIsSaid(t *testing.T) {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer func() { _ = l.Close() }()
	_, err = StartEmbedded(t.Context(), EmbeddedSettings{StoreDir: t.TempDir(), Listen: true, Port: l.Addr().(*net.TCPAddr).Port, StoreBytes: 1 << 30})
	if err == nil || !strings.Contains(err.Error(), "in use") {
		t.Errorf("got %v", err)
	}
}

func TestABrokerThatIsDownAtTheStartIsWaitedFor(t *testing.T) {
	port := freePort(t)
	states := make(chan State, 100)
	b, err := Connect(ConnectSettings{URL: fmt.Sprintf("nats://127.0.0.1:%d", port), OnState: func(s State) { states <- s }})
	if err != nil {
		t.Fatal(err)
	}
	defer b.Close()
	ensured := make(chan error, 1)
	go func() { ensured <- b.EnsureStreams(t.Context(), testStreams()) }()
	dir := t.TempDir()
	settings := EmbeddedSettings{StoreDir: dir, Listen: true, Port: port, StoreBytes: testStreams().Bytes()}
	e, err := StartEmbedded(t.Context(), settings)
	if err != nil {
		t.Fatal(err)
	}
	if err := <-ensured; err != nil {
		t.Fatal(err)
	}
	waitState(t, states, true)
	e.Stop()
	waitState(t, states, false)
	if e, err = StartEmbedded(t.Context(), settings); err != nil {
		t.Fatal(err)
	}
	defer e.Stop()
	waitState(t, states, true)
}

func freePort(t *testing.T) int {
	t.Helper()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer func() { _ = l.Close() }()
	return l.Addr().(*net.TCPAddr).Port
}

func waitState(t *testing.T, states chan State, connected bool) {
	t.Helper()
	for {
		select {
		case s := <-states:
			if s.Connected == connected {
				return
			}
		case <-time.After(30 * time.Second):
			t.Fatalf("connected never became %v", connected)
		}
	}
}

func TestLeases(t *testing.T) {
	_, b := start(t, t.TempDir())
	lease := func(owner string) *Lease {
		l, err := b.Lease(t.Context(), "partition-07", owner)
		if err != nil {
			t.Fatal(err)
		}
		return l
	}
	check := func(what string, err, want error) {
		t.Helper()
		if !errors.Is(err, want) {
			t.Errorf("%s: %v, want %v", what, err, want)
		}
	}
	one, two := lease("one"), lease("two")
	check("renew before it is held", one.Renew(t.Context()), ErrLost)
	check("first", one.Acquire(t.Context()), nil)
	check("second while held", two.Acquire(t.Context()), ErrHeld)
	check("renew", one.Renew(t.Context()), nil)
	again := lease("one")
	check("the same owner after a restart", again.Acquire(t.Context()), nil)
	check("the one before the restart", one.Renew(t.Context()), ErrLost)
	if again.Epoch() <= one.epoch || one.Epoch() != 0 {
		t.Errorf("epochs %d, then %d", one.epoch, again.Epoch())
	}
	check("release", again.Release(t.Context()), nil)
	check("second after the release", two.Acquire(t.Context()), nil)
	check("renew after the release", again.Renew(t.Context()), ErrLost)
}
