package main

import (
	"math"
	"slices"

	"fluxwarden/qc/minute"
	"fluxwarden/store"
)

// dropKnown leaves out the readings that the archive has already, value for value: a file judged twice, or one that overlaps another, adds
// nothing. A reading that says something else under the same stamp is kept: it is evidence.
func dropKnown(a *store.Archive, station string, parts []store.RawPart) ([]store.RawPart, error) {
	if !slices.Contains(a.Stations(), station) {
		return parts, nil
	}
	days, err := a.RawDays(station)
	if err != nil {
		return nil, err
	}
	var out []store.RawPart
	for _, p := range parts {
		if _, known := slices.BinarySearch(days, p.Day); known {
			kept := &minute.Batch{Station: station}
			err := a.ReadRaw(station, p.Day, p.Day, func(b *minute.Batch) error { joinBatch(kept, b); return nil })
			if err != nil {
				return nil, err
			}
			p.Batch = without(p.Batch, kept)
		}
		if p.Batch.Rows() > 0 {
			out = append(out, p)
		}
	}
	return out, nil
}

// without gives the rows of b that known does not have.
func without(b, known *minute.Batch) *minute.Batch {
	at := make(map[minute.Stamp][]int, known.Rows())
	for i, t := range known.At {
		at[t] = append(at[t], i)
	}
	columns := make([]int, len(b.Channels)) // where known has the channel, -1 if nowhere
	for k := range b.Channels {
		columns[k] = slices.IndexFunc(known.Channels, func(c minute.Channel) bool { return c.Name == b.Channels[k].Name })
	}
	fresh := &minute.Batch{Station: b.Station}
	for i, t := range b.At {
		has := slices.ContainsFunc(at[t], func(row int) bool { return sameValues(b, i, known, row, columns) })
		if !has {
			r := b.Reading(i)
			fresh.Append(&r)
		}
	}
	if fresh.Rows() == b.Rows() {
		return b
	}
	return fresh
}

// sameValues says whether every value of b's row i stands in known's row.
func sameValues(b *minute.Batch, i int, known *minute.Batch, row int, columns []int) bool {
	for k := range b.Channels {
		v := b.Channels[k].Value(i)
		if math.IsNaN(v.Mean) {
			continue
		}
		if columns[k] < 0 || !sameValue(v, known.Channels[columns[k]].Value(row)) {
			return false
		}
	}
	return true
}

func sameValue(x, y minute.Value) bool {
	same := func(a, b float64) bool { return a == b || math.IsNaN(a) && math.IsNaN(b) }
	return x.Mean == y.Mean && x.N == y.N && same(x.SD, y.SD) && same(x.Min, y.Min) && same(x.Max, y.Max)
}
