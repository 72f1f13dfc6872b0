package store

import (
	"fmt"
)

// Compact makes one file of a station's month, YYYY-MM: of its day files of minutes, and of its part files of readings. The rows stay as
// they are, so their digests do too. It is a commit of its own and moves no position. Replaced files of minutes are deleted, not
// superseded, since no row of them has changed.
func (a *Archive) Compact(partition int, station, month string) error {
	if a.lock == nil {
		return fmt.Errorf("compact: archive %s is open to read only", a.dir)
	}
	if _, _, err := span(month); err != nil || !isMonth(month) {
		return fmt.Errorf("compact: month %q: write it as 2026-06", month)
	}
	if i, ok := a.partitionOf(station); !ok || i != partition {
		return fmt.Errorf("compact: station %q: not in partition %02d", station, partition)
	}
	p := a.parts[partition]
	p.commit.Lock()
	defer p.commit.Unlock()
	if p.broken != nil {
		return fmt.Errorf("compact: partition %02d: an earlier commit ended half-way (%w); open the archive anew", partition, p.broken)
	}
	last := p.last
	c := &Commit{Partition: partition, Base: last.Number, Epoch: last.Epoch, Positions: last.Positions, RulesDigest: last.RulesDigest, Program: last.Program}
	d := &draft{c: c, a: a, p: p, number: last.Number + 1, made: &harvest{}}
	d.compactMinutes(station, month)
	d.compactRaw(station, month)
	if len(d.jobs) == 0 {
		return nil
	}
	if err := d.encode(); err != nil {
		return fmt.Errorf("compact: %s %s: %w", station, month, err)
	}
	if _, err := d.finish(); err != nil {
		return fmt.Errorf("compact: %s %s: %w", station, month, err)
	}
	return nil
}

func ofMonth(files []File, month string) []File {
	var list []File
	for _, f := range files {
		if len(f.Period) >= len(month) && f.Period[:len(month)] == month {
			list = append(list, f)
		}
	}
	return list
}

func (d *draft) compactMinutes(station, month string) {
	old := ofMonth(d.current(station, TableMinutes), month)
	if len(old) == 0 || len(old) == 1 && isMonth(old[0].Period) {
		return
	}
	for _, f := range old {
		d.removes = append(d.removes, Removed{Path: f.Path})
	}
	d.add(File{Table: TableMinutes, Station: station, Period: month, Sealed: true}, func(f File) ([]byte, File, error) {
		t, days, err := d.a.mergeMonth(&Month{Station: station, Month: month}, old)
		if err != nil {
			return nil, f, err
		}
		if err := d.inheritMeta(old); err != nil {
			return nil, f, err
		}
		return d.makeMinutes(f, t, days, old)
	})
}

// inheritMeta keeps what the day files said beyond the archive's own books: calibrations, licence, citation. The newest file's word holds.
func (d *draft) inheritMeta(old []File) error {
	own, err := d.meta(&File{Table: TableMinutes, Station: old[0].Station, Period: old[0].Period}, map[string]string{})
	if err != nil {
		return err
	}
	kept := map[string]string{}
	for _, f := range old {
		meta, err := d.a.metaOf(f)
		if err != nil {
			return err
		}
		for k, v := range meta {
			if _, ours := own[k]; !ours && !isOwnMeta(k) {
				kept[k] = v
			}
		}
	}
	d.c.Meta = kept
	return nil
}

func (d *draft) compactRaw(station, month string) {
	old := ofMonth(d.current(station, TableRaw), month)
	if len(old) == 0 || len(old) == 1 && isMonth(old[0].Period) {
		return
	}
	for _, f := range old {
		d.removes = append(d.removes, Removed{Path: f.Path})
	}
	d.add(File{Table: TableRaw, Station: station, Period: month}, func(f File) ([]byte, File, error) {
		t, err := d.a.readRawGroup(old)
		if err != nil {
			return nil, f, err
		}
		return d.encodeRaw(f, t)
	})
}
