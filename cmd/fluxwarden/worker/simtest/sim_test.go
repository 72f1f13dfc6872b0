package simtest

import (
	"flag"
	"fmt"
	"maps"
	"math"
	"runtime"
	"slices"
	"sync"
	"sync/atomic"
	"testing"

	"fluxwarden/cmd/fluxwarden/worker"
	"fluxwarden/qc/minute"
)

var (
	seeds      = flag.Int("seeds", 24, "how many seeds to simulate")
	storeSeeds = flag.Int("storeseeds", 4, "how many seeds to simulate with the real store")
	firstArg   = flag.Uint64("first", 1, "the first of them")
)

const simulatedDays = 2

func memoryBackend() backend { return newMemory() }

// TestSimulation attacks the worker. The seed of a failure is printed: run it alone with -first SEED -seeds 1.
func TestSimulation(t *testing.T) {
	total := map[string]int{}
	var mu sync.Mutex
	simulate(*firstArg, *seeds, Options{Days: simulatedDays, Backend: memoryBackend}, func(seed uint64, counts map[string]int, err error) {
		mu.Lock()
		defer mu.Unlock()
		for k, v := range counts {
			total[k] += v
		}
		if err != nil {
			t.Errorf("seed %d: %v\nrerun: go test ./cmd/fluxwarden/worker/simtest -run TestSimulation -first %d -seeds 1", seed, err, seed)
		}
	})
	for _, k := range slices.Sorted(maps.Keys(total)) {
		t.Logf("%-26s %d", k, total[k])
	}
	if *seeds < 20 {
		return
	}
	// An attack that is never felt proves nothing.
	for _, k := range []string{"deaths in a commit", "kills", "zombies", "failed lost_partition", "broker power cuts", "archive power cuts", "duplicates",
		"late", "days judged again", "gap reused", "gap recreate", "gap purged", "journals remade", "journals trimmed", "acknowledged tails lost",
		"notes given", "notes", "notes: stream remade", "notes: tails lost"} {
		if total[k] == 0 {
			t.Errorf("no seed saw any of: %s", k)
		}
	}
}

// TestSimulationOnTheStore attacks the worker together with the real store on a disk that loses what is not synced. Each file
// is a real one here, so a seed takes longer.
func TestSimulationOnTheStore(t *testing.T) {
	for i, share := range []float64{0, 0.5, 1} {
		total := map[string]int{}
		var mu sync.Mutex
		o := Options{Days: 2, Backend: func() backend { return newDisk(share, nil) }}
		simulate(*firstArg+uint64(i)*1000, *storeSeeds, o, func(seed uint64, counts map[string]int, err error) {
			mu.Lock()
			defer mu.Unlock()
			for k, v := range counts {
				total[k] += v
			}
			if err != nil {
				t.Errorf("seed %d, %v of what is unsynced survives: %v", seed, share, err)
			}
		})
		t.Logf("%v of what is unsynced survives: %v", share, total)
		if *storeSeeds >= 4 && (total["power cuts in a commit"] == 0 || total["archive power cuts"] == 0) {
			t.Errorf("share %v: no power cut was felt", share)
		}
	}
}

// simulate runs seeds on all cores.
func simulate(first uint64, n int, o Options, done func(seed uint64, counts map[string]int, err error)) {
	var next atomic.Uint64
	var wg sync.WaitGroup
	for range runtime.GOMAXPROCS(0) {
		wg.Go(func() {
			for {
				k := next.Add(1) - 1
				if k >= uint64(n) {
					return
				}
				counts, err := runOne(first+k, o)
				done(first+k, counts, err)
			}
		})
	}
	wg.Wait()
}

func runOne(seed uint64, o Options) (counts map[string]int, err error) {
	defer func() {
		if r := recover(); r != nil {
			buf := make([]byte, 4096)
			err = fmt.Errorf("panic: %v\n%s", r, buf[:runtime.Stack(buf, false)])
		}
	}()
	return Run(seed, o)
}

// TestTheCorePanics lets the core panic on some minutes, for good. They must be left out and set aside, the same ones whatever
// happens, and all others judged as if they had not been sent.
func TestTheCorePanics(t *testing.T) {
	trap := func(b *minute.Block, from int) {
		for r := from; r < b.Rows; r++ {
			if v := b.Columns[0].Mean[r]; v > 0 && math.Mod(v, 47) == 0 {
				panic("a value that the core cannot bear")
			}
		}
	}
	aside := 0
	var mu sync.Mutex
	simulate(*firstArg+500, 8, Options{Days: 2, Backend: memoryBackend, Trap: trap}, func(seed uint64, counts map[string]int, err error) {
		mu.Lock()
		defer mu.Unlock()
		aside += counts["set aside"]
		if err != nil {
			t.Errorf("seed %d: %v", seed, err)
		}
	})
	if aside == 0 {
		t.Error("nothing was set aside")
	}
}

// TestSimulationCanFail plants bugs of the kinds that the simulation is there to find.
func TestSimulationCanFail(t *testing.T) {
	for name, faulty := range map[string]worker.Faulty{
		"late readings are all taken for new":    {NoDedupe: true},
		"a position ahead of what was taken":     {PositionEarly: true},
		"late readings change no minute":         {NoJudgingAgain: true},
		"positions are trusted in any journal":   {TrustAnyJournal: true},
		"a partition that was lost is worked on": {KeepAfterLost: true},
		"what is owed is forgotten at a stop":    {ForgetOwed: true},
		"a note acts on days to come only":       {NotesAhead: true},
	} {
		t.Run(name, func(t *testing.T) {
			for seed := uint64(1); seed <= 60; seed++ {
				o := Options{Days: simulatedDays, Backend: memoryBackend, Faulty: faulty}
				if faulty.ForgetOwed {
					o.Days = 5 // a note must be about several days for some to be owed still
				}
				if _, err := runOne(seed, o); err != nil {
					t.Logf("caught by seed %d: %v", seed, err)
					return
				}
			}
			t.Error("60 seeds did not notice")
		})
	}
}

// TestStoreSimulationCanFail leaves out what makes files outlive a power cut.
func TestStoreSimulationCanFail(t *testing.T) {
	for _, op := range []string{"sync", "syncdir"} {
		t.Run("no "+op, func(t *testing.T) {
			o := Options{Days: 2, Backend: func() backend { return newDisk(0, func(what string) bool { return what == op }) }}
			for seed := uint64(1); seed <= 20; seed++ {
				if _, err := runOne(seed, o); err != nil {
					t.Logf("caught by seed %d: %.300s", seed, err)
					return
				}
			}
			t.Error("20 seeds did not notice")
		})
	}
}
