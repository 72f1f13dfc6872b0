package store

import (
	"cmp"
	"errors"
	"fmt"
	"io/fs"
	"path"
	"regexp"
	"slices"
	"strconv"
	"strings"
)

// DropRaw takes readings out of the archive for good: the files of a station whose days all lie before the given one. It is a commit of its own and
// moves no position. Rows judged from them stay, and can no longer be judged again. It gives the record that stands last afterwards, and how many
// bytes went.
func (a *Archive) DropRaw(partition int, station string, before int64) (number uint64, bytes int64, err error) {
	if a.lock == nil {
		return 0, 0, fmt.Errorf("drop raw: archive %s is open to read only", a.dir)
	}
	if partition < 0 || partition >= Partitions {
		return 0, 0, fmt.Errorf("drop raw: partition %d: there are %d, from 0 on", partition, Partitions)
	}
	last, _, err := a.Last(partition)
	if err != nil {
		return 0, 0, err
	}
	d, err := a.draft(&Commit{Partition: partition, Base: last.Number, Epoch: last.Epoch, Positions: last.Positions, RulesDigest: last.RulesDigest,
		Program: last.Program, Reason: "readings before " + dayName(before) + " are kept no longer"})
	if err != nil {
		return 0, 0, err
	}
	defer d.p.commit.Unlock()
	for _, f := range d.current(station, TableRaw) {
		if _, to, err := span(f.Period); err == nil && to <= before {
			d.removes = append(d.removes, Removed{Path: f.Path})
			bytes += f.Bytes
		}
	}
	if len(d.removes) == 0 {
		return last.Number, 0, nil
	}
	r, err := d.finish()
	if err != nil {
		return 0, 0, fmt.Errorf("drop raw of %s: %w", station, err)
	}
	return r.Number, bytes, nil
}

// Sizes gives the bytes of the archive's files by the folder that they are in; those beside folders count as "books". What cannot be looked
// at while a commit moves it counts nothing.
func (a *Archive) Sizes() (map[string]int64, error) {
	out := map[string]int64{}
	entries, err := a.fs.ReadDir(a.path("."))
	if err != nil {
		return nil, err
	}
	for _, e := range entries {
		if !e.Dir {
			out["books"] += a.size(e.Name)
			continue
		}
		err := a.walkDir(e.Name, func(name string) error { out[e.Name] += a.size(name); return nil })
		if err != nil && !errors.Is(err, fs.ErrNotExist) {
			return nil, err
		}
	}
	return out, nil
}

func (a *Archive) size(name string) int64 {
	e, err := a.fs.Stat(a.path(name))
	if err != nil {
		return 0
	}
	return max(e.Size, 0)
}

var commitInName = regexp.MustCompile(`_c(\d+)_[0-9a-f]{12}\.`)

// TrimSuperseded deletes replaced revisions, those of the earliest commits first, until what is left takes at most so many bytes. Replaced files of
// notes stay. It gives how many files went.
func (a *Archive) TrimSuperseded(most int64) (removed int, err error) {
	if a.lock == nil {
		return 0, fmt.Errorf("trim superseded: archive %s is open to read only", a.dir)
	}
	type file struct {
		name   string
		commit uint64
		bytes  int64
	}
	var list []file
	total := int64(0)
	err = a.walkDir("superseded", func(name string) error {
		m := commitInName.FindStringSubmatch(name)
		bytes := a.size(name)
		total += bytes
		if m != nil && !strings.HasPrefix(name, "superseded/"+TableNotes+"/") {
			n, _ := strconv.ParseUint(m[1], 10, 64)
			list = append(list, file{name, n, bytes})
		}
		return nil
	})
	if err != nil {
		return 0, err
	}
	slices.SortFunc(list, func(x, y file) int { return cmp.Or(cmp.Compare(x.commit, y.commit), cmp.Compare(x.name, y.name)) })
	dirs := map[string]bool{}
	for _, f := range list {
		if total <= most {
			break
		}
		if err := a.fs.Remove(a.path(f.name)); err != nil && !errors.Is(err, fs.ErrNotExist) {
			return removed, err
		}
		total -= f.bytes
		removed++
		dirs[path.Dir(f.name)] = true
	}
	for d := range dirs {
		if err := a.fs.SyncDir(a.path(d)); err != nil {
			return removed, err
		}
	}
	return removed, nil
}
