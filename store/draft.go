package store

import (
	"fmt"
	"runtime"
	"sync"
)

// A Draft is a commit that is made bit by bit, for one that is too long to be held in memory. Its files are written under staging/ as
// they are added; nothing of it counts before Finish, and when the program dies before that it is swept as if it had never been.
type Draft struct {
	d     *draft
	begun Commit
	slots chan struct{}
	wg    sync.WaitGroup
	seen  map[string]bool // table, station and period of the files to be made
	mu    sync.Mutex
	err   error
	owes  bool
}

// Begin starts a commit of the partition, position, rules and reason in c, whose content is added later. Other commits of the partition
// wait until Finish or Drop.
func (a *Archive) Begin(c *Commit) (*Draft, error) {
	own := *c
	own.Raw, own.Days, own.Months, own.Revisions, own.Faults, own.Summaries, own.Notes = nil, nil, nil, nil, nil, nil, nil
	d, err := a.draft(&own)
	if err != nil {
		return nil, err
	}
	return &Draft{d: d, begun: own, slots: make(chan struct{}, runtime.GOMAXPROCS(0)), seen: map[string]bool{}}, nil
}

// Add adds the content of c: readings, days, months, revisions, faults, summaries. It goes on writing after it has returned, so what
// was added must not be changed any more. All that makes one file comes in one Add: the summaries of a month, the readings of a day. A
// reason in c holds for its days instead of the draft's. An error of earlier writing is given too. Add is not for several goroutines.
func (t *Draft) Add(c *Commit) error {
	t.mu.Lock()
	err := t.err
	t.mu.Unlock()
	if err != nil {
		return err
	}
	d := t.d
	content := t.begun
	content.Raw, content.Days, content.Months, content.Revisions = c.Raw, c.Days, c.Months, c.Revisions
	content.Faults, content.Summaries, content.Notes = c.Faults, c.Summaries, c.Notes
	if c.Reason != "" {
		content.Reason = c.Reason
	}
	// The jobs of this Add see the content as it is now; what earlier ones see does not change under them.
	part := &draft{c: &content, a: d.a, p: d.p, number: d.number, fresh: d.fresh, made: d.made}
	if err := part.plan(); err != nil {
		return t.fail(fmt.Errorf("commit: partition %02d: %w", content.Partition, err))
	}
	d.fresh, d.removes = part.fresh, append(d.removes, part.removes...)
	for _, j := range part.jobs {
		what := fmt.Sprintf("%s of %s %s", j.file.Table, j.file.Station, j.file.Period)
		if t.seen[what] {
			return t.fail(fmt.Errorf("commit: partition %02d: %s: twice in one commit", content.Partition, what))
		}
		t.seen[what] = true
		d.jobs = append(d.jobs, j)
		t.slots <- struct{}{}
		t.wg.Add(1)
		go func() {
			defer t.wg.Done()
			defer func() { <-t.slots }()
			err := part.encodeOne(j)
			j.make = nil // what it holds is written
			if err != nil {
				_ = t.fail(fmt.Errorf("commit: partition %02d: %w", content.Partition, err))
			}
		}()
	}
	return nil
}

func (t *Draft) fail(err error) error {
	t.mu.Lock()
	defer t.mu.Unlock()
	if t.err == nil {
		t.err = err
	}
	return t.err
}

// Empty says whether nothing has been added, nor what is owed been changed.
func (t *Draft) Empty() bool { return len(t.d.jobs) == 0 && !t.owes }

// Finish makes it count, all or nothing, and gives the record. Errors are those of Archive.Commit.
func (t *Draft) Finish() (Record, error) {
	t.wg.Wait()
	defer t.d.p.commit.Unlock()
	if t.err != nil {
		t.d.drop()
		return Record{}, t.err
	}
	r, err := t.d.finish()
	if err != nil {
		return Record{}, fmt.Errorf("commit: partition %02d: record %d: %w", t.begun.Partition, t.d.number, err)
	}
	return r, nil
}

// Owe replaces the days that the partition still owes when the draft is finished; see Commit.Owed.
func (t *Draft) Owe(list []Owed) {
	if list == nil {
		list = []Owed{}
	}
	t.d.c.Owed, t.owes = list, true
}

// Drop gives it up and removes what it has staged.
func (t *Draft) Drop() {
	t.wg.Wait()
	t.d.drop()
	t.d.p.commit.Unlock()
}
