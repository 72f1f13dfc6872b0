package worker

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"maps"
	"slices"
	"time"

	"fluxwarden/qc/minute"
)

// Defaults of a Config.
const (
	GraceDefault       = 10 * time.Second
	CommitEveryDefault = 10 * time.Minute
	CommitRowsDefault  = 200_000 // readings of one partition
	tickEvery          = time.Second
	leaseEvery         = 2 * time.Second
	waitForNext        = 250 * time.Millisecond
	retryAfter         = 5 * time.Second
	retryAfterMax      = time.Minute
	idlePositionEvery  = time.Hour      // a position that moved without readings of its own is committed this often
	purgeBehind        = 24 * time.Hour // the journal keeps this much behind the committed position
	partitionCount     = 64
)

// A Config is what a worker stands on. All fields without a default must be given; Live, Trap and Log may be nil.
type Config struct {
	Journal     Journal
	Lease       Lease
	Changes     Changes // nil where nobody can give notes
	Archive     Archive
	Rules       Rules
	Findings    Findings
	Aside       Aside
	Live        Live
	Meter       Meter
	Clock       Clock
	Log         *slog.Logger
	Program     string        // name and version, for the archive's books
	Grace       time.Duration // how long a minute waits for its readings after its end
	CommitEvery time.Duration // by the clock, per partition
	// KeepRaw is for how long readings are kept, at least KeepRawLeast; 0 is for ever.
	KeepRaw    time.Duration
	CommitRows int // a partition that has so many readings waiting commits at once
	// Trap is called before the core judges a block's rows from the given one on; a test may panic in it as the core might.
	Trap func(block *minute.Block, from int)
	// Faulty plants a bug: a test shows by it that the simulation can fail.
	Faulty Faulty
}

// Faulty are bugs that a test may plant to show that it would see them.
type Faulty struct {
	NoDedupe        bool // late readings are all taken for new
	PositionEarly   bool // a commit carries a position beyond what was taken
	NoJudgingAgain  bool // late readings are kept but change no minute
	TrustAnyJournal bool // positions are not held against the stream
	ForgetOwed      bool // a commit does not say which days are still to be judged once more
	NotesAhead      bool // a note acts on days yet to come only
	KeepAfterLost   bool // a partition that was lost is worked on as if nothing had been
}

// KeepRawLeast is for how long readings must be kept so that late data and notes of the last month can be judged with what they look back on.
const KeepRawLeast = 92 * 24 * time.Hour

// A Worker works on the partitions that it holds a lease for. It is to be used by one goroutine.
type Worker struct {
	cfg        Config
	log        *slog.Logger
	grace      minute.Stamp
	partitions map[int]*partition
	retry      map[int]retry // partitions that could not be taken over
	cursor     Cursor
	reopen     bool
	stream     StreamState // as it was when the cursor was opened
	ticked     time.Time
	leased     time.Time
	purged     time.Time
	metered    time.Time
	caughtUp   bool
	spares     *spares
	listened   time.Time // to the stream of notes
	payAt      time.Time // when a day may be judged once more
	paid       time.Time
	failing    string // the error that was logged last, so that it is logged once
}

type retry struct {
	at   time.Time
	wait time.Duration
}

// New makes a worker that owns nothing yet.
func New(cfg Config) *Worker {
	if cfg.Grace <= 0 {
		cfg.Grace = GraceDefault
	}
	if cfg.CommitEvery <= 0 {
		cfg.CommitEvery = CommitEveryDefault
	}
	if cfg.CommitRows <= 0 {
		cfg.CommitRows = CommitRowsDefault
	}
	log := cfg.Log
	if log == nil {
		log = slog.New(slog.DiscardHandler)
	}
	return &Worker{cfg: cfg, log: log, grace: minute.Stamp(cfg.Grace / time.Microsecond), partitions: map[int]*partition{}, retry: map[int]retry{}, spares: newSpares()}
}

// Run works until the context ends. What is not committed by then is read from the journal again.
func (w *Worker) Run(ctx context.Context) {
	defer w.Close()
	for ctx.Err() == nil {
		w.Step(ctx, waitForNext)
	}
}

// Close ends reading. What is not committed is read again by the next worker.
func (w *Worker) Close() { w.closeCursor() }

// Ready says whether the worker reads the journal and has caught up with it.
func (w *Worker) Ready() bool { return w.cursor != nil && w.caughtUp }

// Step does a bounded piece of work: it looks after the leases and the clock, and takes the next message if one comes
// within the wait, and judges a day once more if one is owed. It says whether it did one of the two.
func (w *Worker) Step(ctx context.Context, wait time.Duration) bool {
	now := w.cfg.Clock.Now()
	if len(w.partitions) == 0 || passed(w.leased, now, leaseEvery) {
		w.leased = now
		w.reconcile(ctx, now)
	}
	took := w.readNext(ctx, wait)
	now = w.cfg.Clock.Now()
	if passed(w.metered, now, tickEvery) {
		w.metered = now
		if w.cursor != nil {
			w.cfg.Meter.Journal(w.stream, w.cursor.Pending())
		}
		w.cfg.Meter.Waiting(w.backlog())
	}
	if w.caughtUp && passed(w.ticked, now, tickEvery) {
		w.ticked = now
		w.tick(ctx, now)
	}
	if w.cfg.Changes != nil && passed(w.listened, now, tickEvery) {
		w.listened = now
		w.listen(ctx)
	}
	paid := w.payOne(ctx, now)
	w.commitDue(ctx, now)
	return took || paid
}

// backlog is what waits to be written or sealed now.
func (w *Worker) backlog() Backlog {
	var b Backlog
	oldest := int64(lastDay)
	for _, p := range w.partitions {
		if p.rows > 0 && (b.UncommittedSince.IsZero() || p.committed.Before(b.UncommittedSince)) {
			b.UncommittedSince = p.committed
		}
		for _, s := range p.stations {
			b.UnsealedDays += len(s.sealing)
			for day := range s.sealing {
				oldest = min(oldest, day)
			}
			b.Owed += len(s.again)
			if s.current != nil && !s.current.idle && !s.sealing[s.current.day] {
				b.UnsealedDays++
				oldest = min(oldest, s.current.day)
			}
		}
	}
	if b.UnsealedDays > 0 {
		b.OldestUnsealed = time.Unix(oldest*86400, 0).UTC()
	}
	return b
}

// passed says whether so much time has gone by since, or the clock was set back.
func passed(since, now time.Time, span time.Duration) bool {
	return since.IsZero() || now.Sub(since) >= span || now.Before(since)
}

// reconcile takes over the partitions that the lease gives and lets go of the others.
func (w *Worker) reconcile(ctx context.Context, now time.Time) {
	owned, err := w.cfg.Lease.Owned(ctx, now)
	if err != nil {
		w.fail("lease", "leases are not known; work goes on with those held", err)
		return
	}
	for p := range w.partitions {
		if _, ok := owned[p]; !ok {
			delete(w.partitions, p)
			w.reopen = true
		}
	}
	for _, p := range slices.Sorted(maps.Keys(owned)) {
		if have := w.partitions[p]; have != nil {
			have.epoch = owned[p]
			continue
		}
		if r, ok := w.retry[p]; ok && now.Before(r.at) {
			continue
		}
		part, err := w.adopt(p, owned[p], now)
		if err != nil {
			w.putOff(p, now)
			w.fail("read_archive", "a partition cannot be taken over", err, "partition", p)
			continue
		}
		w.partitions[p] = part
		w.reopen = true
	}
	w.cfg.Meter.Owned(len(w.partitions))
}

func (w *Worker) putOff(p int, now time.Time) {
	r := w.retry[p]
	r.wait = min(max(2*r.wait, retryAfter), retryAfterMax)
	r.at = now.Add(r.wait)
	w.retry[p] = r
}

// readNext takes the next message of the journal.
func (w *Worker) readNext(ctx context.Context, wait time.Duration) bool {
	if len(w.partitions) == 0 {
		w.closeCursor()
		pause(ctx, wait)
		return false
	}
	if w.cursor == nil || w.reopen {
		if err := w.openCursor(ctx); err != nil {
			w.fail("read_journal", "the journal cannot be read; it is tried again", err)
			w.closeCursor()
			pause(ctx, wait)
			return false
		}
	}
	d, ok, err := w.cursor.Next(ctx, wait)
	switch {
	case ctx.Err() != nil:
		return false
	case err != nil:
		w.fail("read_journal", "the journal cannot be read; it is opened again", err)
		w.closeCursor()
		return false
	case !ok:
		w.caughtUp = w.cursor.Pending() == 0
		return false
	}
	w.deliver(ctx, d)
	w.caughtUp = w.cursor.Pending() == 0
	return true
}

// pause waits for real, so that a worker that can do nothing does not spin. A wait of zero, as in a simulation, returns at once.
func pause(ctx context.Context, wait time.Duration) {
	if wait <= 0 {
		return
	}
	t := time.NewTimer(wait)
	defer t.Stop()
	select {
	case <-ctx.Done():
	case <-t.C:
	}
}

func (w *Worker) closeCursor() {
	if w.cursor != nil {
		w.cursor.Close()
	}
	w.cursor, w.caughtUp = nil, false
}

// deliver takes one message to the stations it has readings of.
func (w *Worker) deliver(ctx context.Context, d Delivery) {
	p := w.partitions[d.Partition]
	known := p == nil || d.Seq <= p.taken.Seq
	w.advanceTo(&d)
	if known {
		return
	}
	if d.Bad != nil {
		w.setAside(ctx, ReasonUnreadable, "", nil, d.Payload, d.Bad.Error())
		return
	}
	for i := range d.Groups {
		s, err := w.station(ctx, p, d.Groups[i].Station)
		if err != nil {
			w.drop(d.Partition, "read_archive", err)
			return
		}
		if s != nil {
			s.take(ctx, d.Groups[i].Readings)
		}
		if w.partitions[d.Partition] != p {
			return
		}
	}
}

// station gives a station's state, from the archive if it is not here yet.
func (w *Worker) station(ctx context.Context, p *partition, id string) (*station, error) {
	if s := p.stations[id]; s != nil {
		return s, nil
	}
	s, err := w.recoverStation(ctx, p.number, id)
	if err != nil {
		return nil, fmt.Errorf("station %s: %w", id, err)
	}
	p.stations[id] = s
	return s, nil
}

// tick lets time go on for the stations, where nothing waits in the journal that could contradict it.
func (w *Worker) tick(ctx context.Context, now time.Time) {
	for n := range partitionCount {
		p := w.partitions[n]
		if p == nil {
			continue
		}
		w.recoverOne(ctx, p)
		if w.partitions[n] != p {
			continue
		}
		for _, id := range slices.Sorted(maps.Keys(p.stations)) {
			s := p.stations[id]
			s.tick(ctx, minute.Stamp(now.UnixMicro()))
			if w.partitions[n] != p {
				break
			}
			p.dirty = p.dirty || s.waits(minute.Stamp(now.UnixMicro()))
		}
	}
}

// recoverOne makes the state of one declared station that has sent nothing since the start, so that its gap is seen.
func (w *Worker) recoverOne(ctx context.Context, p *partition) {
	for len(p.waiting) > 0 {
		id := p.waiting[0]
		p.waiting = p.waiting[1:]
		if p.stations[id] != nil {
			continue
		}
		if _, err := w.station(ctx, p, id); err != nil {
			w.drop(p.number, "read_archive", err)
		}
		return
	}
}

// drop forgets a partition. If the lease still gives it to us, it is taken over anew, from the archive, after a while.
func (w *Worker) drop(n int, operation string, err error) {
	if w.partitions[n] == nil {
		return
	}
	delete(w.partitions, n)
	w.reopen = true
	w.putOff(n, w.cfg.Clock.Now())
	if errors.Is(err, ErrLost) {
		w.cfg.Meter.Failed("lost_partition")
		w.log.Warn("a partition was lost to another worker; its state is dropped", "partition", n)
		return
	}
	w.fail(operation, "a partition is dropped and taken over anew", err, "partition", n)
}

// fail counts an error and logs it, unless it is the one logged last.
func (w *Worker) fail(operation, what string, err error, args ...any) {
	w.cfg.Meter.Failed(operation)
	if text := operation + err.Error(); text != w.failing {
		w.failing = text
		w.log.Error(what, append(args, "operation", operation, "cause", err)...)
	}
}

func (w *Worker) panicked(station string, r any) {
	w.cfg.Meter.Failed("judge")
	w.log.Error("the judge panicked; the minute is looked for and set aside", "station", station, "cause", fmt.Sprint(r))
}

func (w *Worker) setAside(ctx context.Context, reason, station string, readings []minute.Reading, payload []byte, detail string) {
	w.cfg.Meter.SetAside(reason, max(1, len(readings)))
	if err := w.cfg.Aside.SetAside(ctx, reason, station, readings, payload, detail); err != nil {
		w.fail("set_aside", "what was set aside could not be stored", err, "reason", reason, "station", station)
	}
}
