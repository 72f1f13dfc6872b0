package store

import (
	"fmt"
	"math/rand/v2"
	"sync"
	"testing"

	"fluxwarden/store/vfs"
)

// Partitions commit side by side while readers look: each reader sees whole commits only, and its own archive follows the writer's.
func TestWritersAndReadersSideBySide(t *testing.T) {
	m := vfs.NewMem()
	a, err := OpenForWriting(m, "/archive", Options{CheckpointEvery: 3})
	if err != nil {
		t.Fatal(err)
	}
	const partitions, commits = 4, 6
	var wg sync.WaitGroup
	for p := range partitions {
		station := fmt.Sprint("s", p)
		first := make(chan struct{})
		wg.Add(2)
		go func() {
			defer wg.Done()
			for n := range uint64(commits) {
				j := shortDay(day0, int(n)+1, uint64(p))
				j.Station = station
				b := madeBatch(station, day0, 2, rand.New(rand.NewPCG(n, uint64(p))))
				if _, err := a.Commit(&Commit{Partition: p, Base: n, Days: []Day{{j, n%2 == 1}}, Raw: []RawPart{{day0, b}}}); err != nil {
					t.Error(err)
				}
				if n == 0 {
					close(first)
				}
			}
		}()
		go func() {
			defer wg.Done()
			<-first
			other, err := Open(m, "/archive")
			if err != nil {
				t.Error(err)
				return
			}
			for seen := 0; seen < commits; {
				for _, from := range []*Archive{a, other} {
					rows := 0
					if err := from.ReadMinutes(station, day0*1440, day0*1440+1440, []string{"global"}, func(r *Rows) error { rows += r.Rows; return nil }); err != nil {
						t.Error(err)
						return
					}
					if from == a {
						seen = max(seen, rows)
					}
					if rows < 1 || rows > commits {
						t.Errorf("%d rows", rows)
						return
					}
				}
			}
		}()
	}
	wg.Wait()
	if found, err := a.Verify(nil); err != nil || len(found) > 0 {
		t.Errorf("%v %v", found, err)
	}
}
