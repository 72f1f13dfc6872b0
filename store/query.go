package store

import (
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"path"
	"slices"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/store/table"
	"fluxwarden/store/vfs"
)

func (a *Archive) partitionOf(station string) (int, bool) {
	a.mu.RLock()
	defer a.mu.RUnlock()
	i, ok := a.stations[station]
	return i, ok
}

// refresh reads what another program has committed since. A writer's own books are up to date once the commit that is under way has ended: it
// publishes before it notes, so a reader that met a file on the move waits for it.
func (a *Archive) refresh(i int) error {
	if a.lock != nil {
		p := a.parts[i]
		p.commit.Lock()
		defer p.commit.Unlock()
		return nil
	}
	fresh := newPartition()
	old := a.parts[i]
	if err := a.loadPartition(i, fresh); err != nil {
		return err
	}
	old.mu.Lock()
	old.last, old.hash, old.have, old.files = fresh.last, fresh.hash, fresh.have, fresh.files
	old.mu.Unlock()
	a.knowStations(i)
	return nil
}

// open opens a file of the tree; what a commit has staged and not yet published is read where it is.
func (a *Archive) open(f File) (vfs.ReadFile, error) {
	r, err := a.fs.Open(a.path(f.Path))
	if errors.Is(err, fs.ErrNotExist) {
		for i := range a.parts {
			if r, e := a.fs.Open(a.path(stagedPath(i, f.Table, path.Base(f.Path)))); e == nil {
				return r, nil
			}
		}
		return a.fs.Open(a.path(f.Path)) // published meanwhile
	}
	return r, err
}

func (a *Archive) readBytes(f File) ([]byte, error) {
	r, err := a.open(f)
	if err != nil {
		return nil, err
	}
	defer r.Close()
	b := make([]byte, r.Size())
	n, err := r.ReadAt(b, 0)
	if n == len(b) {
		err = nil
	}
	return b, err
}

func (a *Archive) readFile(f File, columns []string) (*table.Table, error) {
	r, err := a.open(f)
	if err != nil {
		return nil, err
	}
	defer r.Close()
	t, err := table.Read(r, r.Size(), columns)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", f.Path, err)
	}
	return t, nil
}

// RawDays lists the days that there are readings of, in order.
func (a *Archive) RawDays(station string) ([]int64, error) {
	var days []int64
	err := a.retry(station, func(p *partition) error {
		seen := map[int64]bool{}
		for _, f := range p.current(station, TableRaw) {
			from, _, err := span(f.Period)
			if err != nil {
				return err
			}
			if !isMonth(f.Period) {
				seen[from] = true
				continue
			}
			t, err := a.readFile(f, []string{"time"})
			if err != nil {
				return err
			}
			for _, x := range daysOf(t) {
				seen[x.day] = true
			}
		}
		days = days[:0]
		for d := range seen {
			days = append(days, d)
		}
		slices.Sort(days)
		return nil
	})
	return days, err
}

// ReadRaw gives the readings of the days from one to another, both included: a day at a time, sorted by time. Readings of one stamp come in the
// order in which they were committed.
func (a *Archive) ReadRaw(station string, fromDay, toDay int64, each func(*minute.Batch) error) error {
	next := fromDay
	return a.retry(station, func(p *partition) error {
		files := p.current(station, TableRaw)
		for len(files) > 0 {
			// Files of one month are sorted together: the month file first, then its days.
			n := 1
			for n < len(files) && files[n].Period == files[0].Period {
				n++
			}
			if isMonth(files[0].Period) {
				for n < len(files) && files[n].Period[:7] == files[0].Period[:7] {
					n++
				}
			}
			group := files[:n]
			files = files[n:]
			from, to, err := span(group[0].Period)
			if err != nil {
				return err
			}
			if to <= next || from > toDay {
				continue
			}
			t, err := a.readRawGroup(group)
			if err != nil {
				return err
			}
			for _, x := range daysOf(t) {
				if x.day < next || x.day > toDay {
					continue
				}
				next = x.day + 1
				if err := each(table.ToBatch(station, t.Cut(x.from, x.to))); err != nil {
					return err
				}
			}
		}
		return nil
	})
}

func (a *Archive) readRawGroup(files []File) (*table.Table, error) {
	files = slices.Clone(files)
	slices.SortStableFunc(files, func(x, y File) int { return int(commitOf(x.Path)) - int(commitOf(y.Path)) })
	tables := make([]*table.Table, len(files))
	for i, f := range files {
		t, err := a.readFile(f, nil)
		if err != nil {
			return nil, err
		}
		tables[i] = t
	}
	return joinRaw(tables), nil
}

// commitOf gives the number of the commit that made a file, from its name.
func commitOf(name string) uint64 {
	base := path.Base(name)
	for i := len(base) - 2; i > 0; i-- {
		var n uint64
		if base[i-1] == '_' && base[i] == 'c' {
			if _, err := fmt.Sscanf(base[i+1:], "%d_", &n); err == nil {
				return n
			}
		}
	}
	return 0
}

// Rows are minutes in columns, as they are stored. Table.Find gives a column by its name; a vector without values is all null.
type Rows struct {
	Station string
	*table.Table
}

// Minute gives the minute of row i, counted from 1970.
func (r *Rows) Minute(i int) int64 { return minute.Stamp(r.Vectors[0].Times[i]).Minute() }

// ReadMinutes gives the minutes from one to another, the second not included, in order and a file at a time. Only the columns named are read,
// and always `time`, which comes first; nil is all.
func (a *Archive) ReadMinutes(station string, fromMinute, toMinute int64, columns []string, each func(*Rows) error) error {
	return a.ReadProduct(station, TableMinutes, fromMinute, toMinute, columns, each)
}

// Faults gives all episodes of a station.
func (a *Archive) Faults(station string) ([]fault.Episode, error) {
	var list []fault.Episode
	err := a.retry(station, func(p *partition) error {
		list = nil
		for _, f := range p.current(station, TableFaults) {
			t, err := a.readFile(f, nil)
			if err != nil {
				return err
			}
			l, err := table.ToEpisodes(t)
			if err != nil {
				return fmt.Errorf("%s: %w", f.Path, err)
			}
			list = append(list, l...)
		}
		return nil
	})
	return list, err
}

// RowDigest gives the row digest that a station-day was committed with, empty if the day is not there.
func (a *Archive) RowDigest(station string, day int64) (string, error) {
	digest := ""
	err := a.retry(station, func(p *partition) error {
		for _, f := range p.current(station, TableMinutes) {
			if f.Period != dayName(day) && f.Period != monthOf(day) {
				continue
			}
			d, err := a.digests(f)
			if err != nil {
				return err
			}
			if d[dayName(day)] != "" {
				digest = d[dayName(day)]
				return nil
			}
		}
		return nil
	})
	return digest, err
}

func (a *Archive) metaOf(f File) (map[string]string, error) {
	r, err := a.open(f)
	if err != nil {
		return nil, err
	}
	defer r.Close()
	meta, _, err := table.Meta(r, r.Size())
	if err != nil {
		return nil, fmt.Errorf("%s: %w", f.Path, err)
	}
	return meta, nil
}

func (a *Archive) digests(f File) (map[string]string, error) {
	meta, err := a.metaOf(f)
	if err != nil {
		return nil, err
	}
	d := map[string]string{}
	if err := json.Unmarshal([]byte(meta["row_digests"]), &d); err != nil {
		return nil, fmt.Errorf("%s: metadata row_digests: %w", f.Path, err)
	}
	return d, nil
}
