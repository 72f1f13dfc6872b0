package store

import (
	"errors"
	"io/fs"
	"math/rand/v2"
	"strings"
	"testing"

	"fluxwarden/store/vfs"
)

// heldFS stops a commit after its files have moved and before its books say so, until a reader has missed the file that moved.
type heldFS struct {
	vfs.FS
	hold   bool
	moved  chan struct{}
	missed chan struct{}
}

func (h *heldFS) Rename(from, to string) error {
	err := h.FS.Rename(from, to)
	if h.hold && strings.Contains(from, "/archive/minutes/") {
		h.hold = false
		close(h.moved)
		<-h.missed
	}
	return err
}

func (h *heldFS) Open(name string) (vfs.ReadFile, error) {
	f, err := h.FS.Open(name)
	if errors.Is(err, fs.ErrNotExist) && strings.Contains(name, "/minutes/") {
		select {
		case <-h.missed:
		default:
			close(h.missed)
		}
	}
	return f, err
}

// A reader of the writer's own archive that meets a file on the move waits for the commit instead of giving up.
func TestReaderWaitsForTheCommitUnderWay(t *testing.T) {
	h := &heldFS{FS: vfs.NewMem(), moved: make(chan struct{}), missed: make(chan struct{})}
	a, err := OpenForWriting(h, "/archive", Options{})
	if err != nil {
		t.Fatal(err)
	}
	commit := func(n uint64) error {
		j := shortDay(day0, int(n)+1, n)
		j.Station = "s0"
		b := madeBatch("s0", day0, 2, rand.New(rand.NewPCG(n, 0)))
		_, err := a.Commit(&Commit{Partition: 0, Base: n, Days: []Day{{j, true}}, Raw: []RawPart{{day0, b}}})
		return err
	}
	if err := commit(0); err != nil {
		t.Fatal(err)
	}
	h.hold = true
	done := make(chan error)
	go func() { done <- commit(1) }()
	<-h.moved
	rows := 0
	if err := a.ReadMinutes("s0", day0*1440, day0*1440+1440, []string{"global"}, func(r *Rows) error { rows += r.Rows; return nil }); err != nil {
		t.Error(err)
	}
	if rows != 2 {
		t.Errorf("%d rows, want the 2 of the second commit", rows)
	}
	if err := <-done; err != nil {
		t.Error(err)
	}
}
