package daemon

import (
	"fmt"
	"path"
	"slices"
	"sync"
	"time"

	"fluxwarden/ingest/broker"
	"fluxwarden/qc/engine"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store"
)

// A ruleBook says which rule set holds on which UTC day. It is kept in the archive beside the rule sets, so that a day that is judged again
// after a change, or after a start with another site file, is judged by the rules of that day.
type ruleBook struct {
	mu      sync.RWMutex
	entries []ruleEntry // by day; the first holds for all days before it too
}

type ruleEntry struct {
	from  int64
	site  *rules.Site
	plans map[string]*engine.Plan
}

// keeper is what the rule book needs of the archive.
type keeper interface {
	KeepRules(digest string, text []byte) error
	Schedule() ([]store.RulesFrom, error)
	KeepSchedule(list []store.RulesFrom) error
	Rules(digest string) ([]byte, error)
}

func newEntry(from int64, site *rules.Site) (ruleEntry, error) {
	e := ruleEntry{from: from, site: site, plans: make(map[string]*engine.Plan, len(site.Stations))}
	for i := range site.Stations {
		plan, err := engine.NewPlan(&site.Stations[i])
		if err != nil {
			return e, err
		}
		e.plans[site.Stations[i].ID] = plan
	}
	return e, nil
}

// openRuleBook reads what is kept and lets the site file hold: from the beginning in a new archive, and from the next UTC day where another
// rule set was in force.
func openRuleBook(dir string, a keeper, site *rules.Site, text []byte, today int64) (*ruleBook, error) {
	b := &ruleBook{}
	lines, err := a.Schedule()
	if err != nil {
		return nil, err
	}
	for _, l := range lines {
		from, err := time.Parse(time.DateOnly, l.From)
		if err != nil {
			return nil, fmt.Errorf("archive %s: rules: day %q: not a date", dir, l.From)
		}
		text, err := a.Rules(l.Digest)
		if err != nil {
			return nil, fmt.Errorf("archive %s: the rule set %s that held from %s: %w", dir, l.Digest, l.From, err)
		}
		old, err := rules.Parse(path.Join(dir, "rules", l.Digest+".yaml"), text)
		if err != nil {
			return nil, err
		}
		e, err := newEntry(minute.Stamp(from.UnixMicro()).Day(), old)
		if err != nil {
			return nil, err
		}
		b.entries = append(b.entries, e)
	}
	return b, b.add(a, site, text, today)
}

// add lets a rule set hold from the day after today, or at once where there was none.
func (b *ruleBook) add(a keeper, site *rules.Site, text []byte, today int64) error {
	b.mu.Lock()
	defer b.mu.Unlock()
	from := today + 1
	if len(b.entries) == 0 {
		from = today
	} else if b.entries[len(b.entries)-1].site.Digest == site.Digest {
		// The rules are the same; names and certificates may have changed, and hold at once.
		e, err := newEntry(b.entries[len(b.entries)-1].from, site)
		if err == nil {
			b.entries[len(b.entries)-1] = e
		}
		return err
	}
	e, err := newEntry(from, site)
	if err != nil {
		return err
	}
	if err := a.KeepRules(site.Digest, text); err != nil {
		return fmt.Errorf("rule set is not kept: %w", err)
	}
	entries := slices.Clone(b.entries)
	for len(entries) > 0 && entries[len(entries)-1].from >= from { // replaced before it came into force
		entries = entries[:len(entries)-1]
	}
	entries = append(entries, e)
	if err := keepSchedule(a, entries); err != nil {
		return fmt.Errorf("rule set is not noted: %w", err)
	}
	b.entries = entries
	return nil
}

// keepSchedule replaces the schedule whole, durably.
func keepSchedule(a keeper, entries []ruleEntry) error {
	var lines []store.RulesFrom
	for _, e := range entries {
		lines = append(lines, store.RulesFrom{From: time.Unix(e.from*86400, 0).UTC().Format(time.DateOnly), Digest: e.site.Digest})
	}
	return a.KeepSchedule(lines)
}

// PlanFor implements worker.Rules.
func (b *ruleBook) PlanFor(station string, day int64) *engine.Plan {
	b.mu.RLock()
	defer b.mu.RUnlock()
	k := 0
	for k+1 < len(b.entries) && b.entries[k+1].from <= day {
		k++
	}
	return b.entries[k].plans[station]
}

// Digest implements worker.Rules.
func (b *ruleBook) Digest() string { return b.newest().Digest }

// Stations implements worker.Rules.
func (b *ruleBook) Stations(partition int) []string {
	var ids []string
	site := b.newest()
	for i := range site.Stations {
		if id := site.Stations[i].ID; broker.PartitionOf(id) == partition {
			ids = append(ids, id)
		}
	}
	return ids
}

func (b *ruleBook) newest() *rules.Site {
	b.mu.RLock()
	defer b.mu.RUnlock()
	return b.entries[len(b.entries)-1].site
}

// storeKeeper lets the rule book use an archive that may be opened anew.
type storeKeeper struct {
	read func(func(a *store.Archive) error) error
}

func (k storeKeeper) KeepRules(digest string, text []byte) error {
	return k.read(func(a *store.Archive) error { return a.KeepRules(digest, text) })
}

func (k storeKeeper) Rules(digest string) (text []byte, err error) {
	err = k.read(func(a *store.Archive) error { text, err = a.Rules(digest); return err })
	return text, err
}

func (k storeKeeper) Schedule() (list []store.RulesFrom, err error) {
	err = k.read(func(a *store.Archive) error { list, err = a.Schedule(); return err })
	return list, err
}

func (k storeKeeper) KeepSchedule(list []store.RulesFrom) error {
	return k.read(func(a *store.Archive) error { return a.KeepSchedule(list) })
}
