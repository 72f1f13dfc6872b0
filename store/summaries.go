package store

import (
	"bufio"
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"maps"
	"slices"
)

type summaryLine struct {
	Day     string          `json:"day"`
	Summary json.RawMessage `json:"summary"`
}

// planSummaries writes each month's summaries anew, with the days that change.
func (d *draft) planSummaries() error {
	type key struct{ station, month string }
	changed := map[key]map[string]json.RawMessage{}
	var order []key
	for _, s := range d.c.Summaries {
		if err := checkStation(s.Station); err != nil {
			return err
		}
		if !json.Valid(s.JSON) {
			return fmt.Errorf("summary of %s %s: not JSON", s.Station, dayName(s.Day))
		}
		k := key{s.Station, monthOf(s.Day)}
		if changed[k] == nil {
			changed[k] = map[string]json.RawMessage{}
			order = append(order, k)
		}
		changed[k][dayName(s.Day)] = s.JSON
	}
	for _, k := range order {
		var old []File
		for _, f := range d.current(k.station, TableState) {
			if f.Period == k.month {
				old = append(old, f)
				d.replace(f)
			}
		}
		d.add(File{Table: TableState, Station: k.station, Period: k.month}, func(f File) ([]byte, File, error) {
			return d.a.makeSummaries(f, old, changed[k])
		})
	}
	return nil
}

func (a *Archive) makeSummaries(f File, old []File, changed map[string]json.RawMessage) ([]byte, File, error) {
	all := map[string]json.RawMessage{}
	for _, o := range old {
		lines, err := a.readSummaries(o)
		if err != nil {
			return nil, f, err
		}
		for _, l := range lines {
			all[l.Day] = l.Summary
		}
	}
	maps.Copy(all, changed)
	var b bytes.Buffer
	for _, day := range slices.Sorted(maps.Keys(all)) {
		line, err := json.Marshal(summaryLine{day, all[day]})
		if err != nil {
			return nil, f, err
		}
		b.Write(append(line, '\n'))
	}
	f.Rows = len(all)
	return b.Bytes(), f, nil
}

func (a *Archive) readSummaries(f File) ([]summaryLine, error) {
	b, err := a.readBytes(f)
	if err != nil {
		return nil, err
	}
	var list []summaryLine
	s := bufio.NewScanner(bytes.NewReader(b))
	s.Buffer(nil, 16<<20)
	for s.Scan() {
		var l summaryLine
		if err := json.Unmarshal(s.Bytes(), &l); err != nil {
			return nil, fmt.Errorf("%s: line %d: %w", f.Path, len(list)+1, err)
		}
		list = append(list, l)
	}
	return list, s.Err()
}

// Summaries gives the day summaries of a station from one day to another, both included, in order.
func (a *Archive) Summaries(station string, fromDay, toDay int64) ([]Summary, error) {
	var out []Summary
	err := a.retry(station, func(p *partition) error {
		out = nil
		for _, f := range p.current(station, TableState) {
			from, to, err := span(f.Period)
			if err != nil || to <= fromDay || from > toDay {
				continue
			}
			lines, err := a.readSummaries(f)
			if err != nil {
				return err
			}
			for _, l := range lines {
				day, _, err := span(l.Day)
				if err != nil {
					return fmt.Errorf("%s: day %q: %w", f.Path, l.Day, err)
				}
				if day >= fromDay && day <= toDay {
					out = append(out, Summary{station, day, l.Summary})
				}
			}
		}
		return nil
	})
	return out, err
}

// EachSummary is Summaries a month at a time: f is called for each, in order. It is given up at f's first error.
func (a *Archive) EachSummary(station string, fromDay, toDay int64, f func(Summary) error) error {
	next := fromDay
	return a.retry(station, func(p *partition) error {
		for _, file := range p.current(station, TableState) {
			from, to, err := span(file.Period)
			if err != nil || to <= next || from > toDay {
				continue
			}
			lines, err := a.readSummaries(file)
			if err != nil {
				return err
			}
			for _, l := range lines {
				day, _, err := span(l.Day)
				if err != nil {
					return fmt.Errorf("%s: day %q: %w", file.Path, l.Day, err)
				}
				if day < next || day > toDay {
					continue
				}
				next = day + 1
				if err := f(Summary{station, day, l.Summary}); err != nil {
					return err
				}
			}
		}
		return nil
	})
}

// retry does a read again when a file has gone meanwhile: a commit has replaced it by another that holds as much.
func (a *Archive) retry(station string, read func(p *partition) error) error {
	for try := 0; ; try++ {
		i, ok := a.partitionOf(station)
		if !ok {
			return fmt.Errorf("archive %s: station %q: not in the archive", a.dir, station)
		}
		err := read(a.parts[i])
		if try == readTries || !errors.Is(err, fs.ErrNotExist) {
			return err
		}
		if err := a.refresh(i); err != nil {
			return err
		}
	}
}

// readTries is how often a read follows files that are being replaced.
const readTries = 20
