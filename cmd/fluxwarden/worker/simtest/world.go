package simtest

import (
	"context"
	"log/slog"
	"maps"
	"math/rand/v2"
	"slices"
	"time"

	"fluxwarden/cmd/fluxwarden/worker"
	"fluxwarden/ingest/wire"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// Options of a run.
type Options struct {
	Days    int // of station time
	Calm    bool
	Faulty  worker.Faulty
	Backend func() backend
	Log     *slog.Logger
	Trap    func(block *minute.Block, from int) // panics where the core is to panic
}

// cleanBackend is an archive of the same kind, so that digests can be compared.
func (o *Options) cleanBackend() func() backend {
	if _, ok := o.Backend().(*disk); ok {
		return func() backend { return newDisk(0, nil) }
	}
	return func() backend { return newMemory() }
}

// processes is how many of them may own partitions.
const processes = 2

// A world is one simulation.
type world struct {
	o        Options
	rng      *rand.Rand
	rules    *siteRules
	now      time.Time
	stamps   int64
	journal  *journal
	backend  backend
	procs    [processes]process
	owner    map[int]int // partition to process
	epoch    uint64
	arrivals []arrival // not yet at the gate, by time
	all      []arrival // by id
	acked    map[int]bool
	lost     map[int]bool // lost by the journal before the archive had them
	purged   int
	counts   map[string]int

	changes    *changeFeed
	notes      []plannedNote // not yet given
	ackedNotes map[string]rules.Note
	lostNotes  map[string]bool // lost by the stream, perhaps before the archive had them
}

// A process is one life of a worker after another.
type process struct {
	w      *worker.Worker
	dieIn  int            // commits and the like until it dies; 0 is never
	frozen map[int]uint64 // the leases that it believes in while it does not hear of changes
}

func newWorld(seed uint64, o Options) (*world, error) {
	r, err := newRules()
	if err != nil {
		return nil, err
	}
	w := &world{o: o, rng: rand.New(rand.NewPCG(seed, 0x5eed)), rules: r, now: begin, owner: map[int]int{}, acked: map[int]bool{},
		lost: map[int]bool{}, counts: map[string]int{}, backend: o.Backend()}
	w.journal = &journal{w: w, created: w.stamp()}
	w.arrivals = planArrivals(w.rng, o.Days)
	w.all = slices.Clone(w.arrivals)
	w.changes = &changeFeed{w: w, created: w.stamp()}
	w.ackedNotes, w.lostNotes = map[string]rules.Note{}, map[string]bool{}
	w.notes = planNotes(w.rng, o.Days)
	for _, p := range partitions {
		w.owner[p] = w.rng.IntN(processes)
	}
	return w, nil
}

// Now is the simulated time of day.
func (w *world) Now() time.Time { return w.now }

// stamp is a moment that no other thing has.
func (w *world) stamp() int64 {
	w.stamps++
	return w.now.UnixNano() + w.stamps
}

// run lets time go on until everything was sent, and then until every day is complete.
func (w *world) run() {
	for len(w.arrivals) > 0 {
		w.step()
		w.gate()
		w.say()
		if !w.o.Calm {
			w.chaos()
		}
		for i := range w.procs {
			w.work(i, w.rng.IntN(80))
		}
	}
	w.finish()
}

// step lets some time pass: little while something is on its way, much while nothing is.
func (w *world) step() {
	if len(w.notes) > 0 && w.notes[0].at.Sub(w.now) <= 4*time.Minute {
		w.now = w.now.Add(time.Duration(3+w.rng.IntN(60)) * time.Second)
		return
	}
	if gap := w.arrivals[0].at.Sub(w.now); gap > 4*time.Minute {
		w.now = w.now.Add(min(gap, time.Minute+time.Duration(w.rng.Int64N(int64(12*time.Hour)))))
		return
	}
	w.now = w.now.Add([]time.Duration{3, 20, 60, 240}[w.rng.IntN(4)] * time.Second)
}

// gate takes what has arrived and acknowledges what is synced.
func (w *world) gate() {
	n := 0
	for n < len(w.arrivals) && !w.arrivals[n].at.After(w.now) {
		n++
	}
	came := w.arrivals[:n]
	w.arrivals = w.arrivals[n:]
	for len(came) > 0 {
		size := min(len(came), 1+w.rng.IntN(60))
		w.append(came[:size])
		came = came[size:]
	}
	if w.o.Calm || w.rng.IntN(5) > 0 {
		w.sync()
	}
}

func (w *world) sync() {
	for _, id := range w.journal.sync() {
		w.acked[id] = true
	}
}

// append writes a message for each partition that something has come for.
func (w *world) append(came []arrival) {
	for _, p := range partitions {
		groups := map[string]*wire.Group{}
		var ids []int
		for _, a := range came {
			if partitionOf[a.station] != p {
				continue
			}
			g := groups[a.station]
			if g == nil {
				g = &wire.Group{Station: a.station}
				groups[a.station] = g
			}
			r := a.reading
			r.Received = minute.Stamp(w.now.UnixMicro())
			r.Ahead = r.At > r.Received+2*minute.MicrosPerMinute
			g.Readings = append(g.Readings, r)
			ids = append(ids, a.id)
		}
		if len(ids) == 0 {
			continue
		}
		var list []wire.Group
		for _, s := range slices.Sorted(maps.Keys(groups)) {
			list = append(list, *groups[s])
		}
		w.journal.append(p, list, ids)
	}
}

// work lets a process take up to so many steps.
func (w *world) work(i, steps int) {
	p := &w.procs[i]
	if p.w == nil {
		if w.rng.IntN(4) > 0 && !w.o.Calm {
			return
		}
		w.start(i)
	}
	w.alive(i, func() {
		defer w.powerCut()
		for range max(1, steps) {
			if w.backend.powerCut() {
				return
			}
			if !p.w.Step(context.Background(), 0) {
				return
			}
		}
	})
}

// powerCut starts the machine anew where a process has died by a power cut.
func (w *world) powerCut() {
	if !w.backend.powerCut() {
		return
	}
	w.counts["power cuts in a commit"]++
	w.cutPower()
}

func (w *world) cutPower() {
	for k := range w.procs {
		w.procs[k] = process{}
	}
	w.backend.powerLoss(w.rng.Uint64())
}

func (w *world) start(i int) {
	p := &w.procs[i]
	p.w = worker.New(worker.Config{Journal: w.journal, Lease: lease{w, i}, Changes: w.changes, Archive: w.backend.open(func() bool { return w.dies(i) }), Rules: w.rules,
		Findings: silent{w}, Aside: silent{w}, Meter: meter{w}, Clock: w, Log: w.o.Log, Program: "simulation", CommitEvery: 40 * time.Minute, CommitRows: 250, Faulty: w.o.Faulty, Trap: w.o.Trap})
}

// alive runs a piece of a process, which may die in it.
func (w *world) alive(i int, f func()) {
	defer func() {
		if r := recover(); r != nil {
			if _, ok := r.(died); !ok {
				panic(r)
			}
			w.counts["deaths in a commit"]++
			w.procs[i] = process{}
		}
	}()
	f()
}

func (w *world) dies(i int) bool {
	p := &w.procs[i]
	if p.dieIn == 0 {
		return false
	}
	p.dieIn--
	return p.dieIn == 0
}

// finish ends all trouble, gives everything to one process and lets time go on until the last day is sealed.
func (w *world) finish() {
	w.sync()
	for len(w.notes) > 0 {
		w.changes.append(w.notes[0].note)
		w.notes = w.notes[1:]
	}
	w.changes.sync()
	for i := range w.procs {
		w.procs[i] = process{}
	}
	for _, p := range partitions {
		w.owner[p] = 0
	}
	w.epoch++
	w.start(0)
	end := lastSent.Add(5 * 24 * time.Hour)
	for {
		for w.procs[0].w.Step(context.Background(), 0) {
		}
		if !w.now.Before(end) {
			break
		}
		w.now = w.now.Add(17 * time.Hour)
	}
	for { // days that are owed are paid before the last commit
		w.procs[0].w.CommitAll(context.Background())
		if w.procs[0].w.Owes() == 0 {
			return
		}
		for w.procs[0].w.Step(context.Background(), 0) {
		}
	}
}

// A lease is who should be working, as one process hears of it.
type lease struct {
	w *world
	i int
}

func (l lease) Owned(context.Context, time.Time) (map[int]uint64, error) {
	if f := l.w.procs[l.i].frozen; f != nil {
		return f, nil
	}
	owned := map[int]uint64{}
	for p, i := range l.w.owner {
		if i == l.i {
			owned[p] = l.w.epoch
		}
	}
	return owned, nil
}

// A silent hears findings and what is set aside, and says nothing.
type silent struct{ w *world }

func (silent) Publish(context.Context, []worker.Finding) error { return nil }
func (s silent) SetAside(context.Context, string, string, []minute.Reading, []byte, string) error {
	s.w.counts["set aside"]++
	return nil
}

// A meter counts what the simulation wants to know: that its attacks were felt.
type meter struct{ w *world }

func (m meter) Readings(_ string, n int)            { m.w.counts["readings"] += n }
func (m meter) Duplicates(n int)                    { m.w.counts["duplicates"] += n }
func (m meter) Late(_ string, n int)                { m.w.counts["late"] += n }
func (m meter) LastMinute(string, time.Time)        {}
func (m meter) DayJudgedAgain(string)               { m.w.counts["days judged again"]++ }
func (m meter) JournalGap(reason string)            { m.w.counts["gap "+reason]++ }
func (m meter) Journal(worker.StreamState, uint64)  {}
func (m meter) SetAside(string, int)                {}
func (m meter) Failed(operation string)             { m.w.counts["failed "+operation]++ }
func (m meter) Owned(int)                           {}
func (m meter) Noted(n int)                         { m.w.counts["notes"] += n }
func (m meter) Waiting(worker.Backlog)              {}
func (m meter) Committed(time.Duration, int, error) { m.w.counts["commits"]++ }
