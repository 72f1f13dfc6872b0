package main

import (
	"errors"
	"math"
	"slices"

	"fluxwarden/cmd/fluxwarden/worker"
	"fluxwarden/qc/engine"
	"fluxwarden/qc/minute"
)

// A prepared day has been through the stateless stage.
type prepared struct {
	judged *engine.Judged
	block  *minute.Block
	err    error

	panicked any // what the stateless stage panicked with
}

// A dayTask is a day on its way through the stateless stage.
type dayTask struct {
	day      int64
	readings *minute.Batch
	done     chan prepared
}

// errQuit ends a reading that nobody waits for any more.
var errQuit = errors.New("quit")

// prepareAhead reads the days and runs the stateless stage for some ahead, several at a time. They come in order. It ends when quit is
// closed.
func (p *pass) prepareAhead(rawDays []int64, quit chan struct{}) <-chan *dayTask {
	order := make(chan *dayTask, 2*p.helpers+2)
	tasks := make(chan *dayTask)
	for range p.helpers {
		go func() {
			g := minute.NewGatherer(p.plan.Layout())
			for t := range tasks {
				t.done <- p.prepareDay(g, t.day, t.readings)
			}
		}()
	}
	send := func(t *dayTask, to chan *dayTask) error {
		select {
		case to <- t:
			return nil
		case <-quit:
			return errQuit
		}
	}
	go func() {
		defer close(order)
		defer close(tasks)
		err := p.eachDay(rawDays, func(day int64, readings *minute.Batch) error {
			t := &dayTask{day, readings, make(chan prepared, 1)}
			if err := send(t, order); err != nil {
				return err
			}
			return send(t, tasks)
		})
		if err != nil && !errors.Is(err, errQuit) {
			t := &dayTask{done: make(chan prepared, 1)}
			t.done <- prepared{err: err}
			_ = send(t, order)
		}
	}()
	return order
}

// eachDay gives the readings of each day's minutes, in order. Readings are kept by the day of their stamps; with end labels the first
// stamp of a day belongs to the day before.
func (p *pass) eachDay(rawDays []int64, each func(day int64, readings *minute.Batch) error) error {
	give := func(day int64, readings *minute.Batch) error {
		if day < p.firstDay {
			return nil
		}
		return each(day, readings)
	}
	layout := p.plan.Layout()
	var waiting *minute.Batch // of the day of stamps before, whose last minute is not whole
	waitingDay := int64(math.MinInt64)
	arrive := func(day int64, b *minute.Batch) error {
		if !layout.LabelEnd {
			return give(day, b)
		}
		first := 0
		if slices.IsSorted(b.At) {
			for first < b.Rows() && layout.Minute(b.At[first]) < day*minute.PerDay {
				first++
			}
		} else {
			first = b.Rows()
		}
		early := cutBatch(b, 0, first)
		if waiting != nil && waitingDay < day-1 {
			if err := give(waitingDay, waiting); err != nil {
				return err
			}
			waiting = nil
		}
		if waiting != nil || first > 0 {
			if err := give(day-1, together(waiting, early)); err != nil {
				return err
			}
		}
		waiting, waitingDay = b, day
		return nil
	}
	if err := p.eachRawDay(rawDays, arrive); err != nil {
		return err
	}
	if waiting != nil {
		return give(waitingDay, waiting)
	}
	return nil
}

// eachRawDay gives the readings of each day of stamps, those of the archive with the new ones.
func (p *pass) eachRawDay(rawDays []int64, each func(day int64, b *minute.Batch) error) error {
	next := 0
	if p.known {
		err := p.archive.ReadRaw(p.station.ID, rawDays[0], rawDays[len(rawDays)-1], func(b *minute.Batch) error {
			day := b.At[0].Day()
			for ; next < len(rawDays) && rawDays[next] < day; next++ {
				if err := each(rawDays[next], p.fresh[rawDays[next]]); err != nil {
					return err
				}
			}
			next++
			return each(day, together(b, p.fresh[day]))
		})
		if err != nil {
			return err
		}
	}
	for ; next < len(rawDays); next++ {
		if err := each(rawDays[next], p.fresh[rawDays[next]]); err != nil {
			return err
		}
	}
	return nil
}

// together is the readings of two batches, either of which may be nil. It shares memory with a batch only if the other is empty.
func together(a, b *minute.Batch) *minute.Batch {
	switch {
	case b == nil || b.Rows() == 0:
		if a == nil {
			return &minute.Batch{}
		}
		return a
	case a == nil || a.Rows() == 0:
		return b
	}
	out := worker.CopyBatch(a)
	for i := range b.Rows() {
		r := b.Reading(i)
		out.Append(&r)
	}
	return out
}

// prepareDay gathers one day's minutes and runs the stateless stage over them.
func (p *pass) prepareDay(g *minute.Gatherer, day int64, readings *minute.Batch) (out prepared) {
	defer func() {
		if r := recover(); r != nil {
			out = prepared{panicked: r}
		}
	}()
	select {
	case out = <-p.spares:
	default:
	}
	if out.block == nil {
		out.block = minute.NewBlock(day, len(g.Layout().Channels))
	} else {
		out.block.Reset(day)
	}
	if out.judged == nil {
		out.judged = p.plan.NewJudged(day)
	} else {
		p.plan.Reset(out.judged, day)
	}
	g.Fill(out.block, readings, 0, minute.PerDay)
	p.plan.Prepare(out.judged, out.block, 0, out.block.Rows)
	return out
}

// reuse takes back the memory of a day that is done with.
func (p *pass) reuse(pr prepared) {
	if pr.block == nil && pr.judged == nil {
		return
	}
	select {
	case p.spares <- pr:
	default:
	}
}
