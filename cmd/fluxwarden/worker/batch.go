package worker

import (
	"math"

	"fluxwarden/qc/minute"
)

// CopyBatch is a batch of its own with the same readings.
func CopyBatch(b *minute.Batch) *minute.Batch {
	c := &minute.Batch{Station: b.Station}
	appendAll(c, b)
	return c
}

// appendAll appends a batch to another, column by column.
func appendAll(to, from *minute.Batch) {
	had, more := len(to.At), len(from.At)
	if more == 0 {
		return
	}
	to.At = append(to.At, from.At...)
	to.Received = join(to.Received, from.Received, had, more, 0)
	to.Ahead = join(to.Ahead, from.Ahead, had, more, false)
	nan := math.NaN()
	place := make(map[string]int, len(to.Channels))
	for i := range to.Channels {
		place[to.Channels[i].Name] = i
	}
	for i := range from.Channels {
		f := &from.Channels[i]
		at, ok := place[f.Name]
		if !ok {
			at = len(to.Channels)
			to.Channels = append(to.Channels, minute.Channel{Name: f.Name, Mean: repeat(nil, nan, had)})
		}
		t := &to.Channels[at]
		t.Mean = append(t.Mean, f.Mean...)
		joinStats(t, f.Stats, had, more)
	}
	for i := range to.Channels {
		t := &to.Channels[i]
		if len(t.Mean) == had {
			t.Mean = repeat(t.Mean, nan, more)
			joinStats(t, nil, had, more)
		}
	}
}

func joinStats(t *minute.Channel, f *minute.Stats, had, more int) {
	if t.Stats == nil && f == nil {
		return
	}
	nan := math.NaN()
	if t.Stats == nil {
		t.Stats = &minute.Stats{SD: repeat(nil, nan, had), Min: repeat(nil, nan, had), Max: repeat(nil, nan, had), N: make([]int32, had)}
	}
	s := t.Stats
	if f == nil {
		s.SD, s.Min, s.Max, s.N = repeat(s.SD, nan, more), repeat(s.Min, nan, more), repeat(s.Max, nan, more), repeat(s.N, 0, more)
		return
	}
	s.SD, s.Min, s.Max, s.N = append(s.SD, f.SD...), append(s.Min, f.Min...), append(s.Max, f.Max...), append(s.N, f.N...)
}

func join[T any](to, from []T, had, more int, none T) []T {
	if to == nil && from == nil {
		return nil
	}
	if to == nil {
		to = repeat(nil, none, had)
	}
	if from == nil {
		return repeat(to, none, more)
	}
	return append(to, from...)
}

func repeat[T any](s []T, v T, n int) []T {
	for range n {
		s = append(s, v)
	}
	return s
}
