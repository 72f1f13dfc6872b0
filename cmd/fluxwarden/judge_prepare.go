package main

import (
	"runtime"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/minute"
)

// A prepared day has been through the stateless stage.
type prepared struct {
	judged *engine.Judged
	block  *minute.Block
	err    error
}

// A stages runs the stateless stage for days ahead, several at a time, and gives them in order.
type stages struct {
	out  chan prepared
	quit chan struct{}
}

func (s *stages) stop() { close(s.quit) }

// prepareAhead starts the stage for the days.
func (j *batchJudge) prepareAhead(days []int64) *stages {
	n := runtime.GOMAXPROCS(0)
	s := &stages{out: make(chan prepared), quit: make(chan struct{})}
	slots := make([]chan prepared, len(days))
	for i := range slots {
		slots[i] = make(chan prepared, 1)
	}
	room := make(chan struct{}, 2*n+2)
	next := make(chan int)
	go func() {
		defer close(next)
		for i := range days {
			select {
			case room <- struct{}{}:
			case <-s.quit:
				return
			}
			select {
			case next <- i:
			case <-s.quit:
				return
			}
		}
	}()
	for range n {
		go func() {
			g := minute.NewGatherer(j.plan.Layout())
			for i := range next {
				slots[i] <- j.prepareDay(g, days[i])
			}
		}()
	}
	go func() {
		for i := range days {
			select {
			case p := <-slots[i]:
				select {
				case s.out <- p:
				case <-s.quit:
					return
				}
			case <-s.quit:
				return
			}
			<-room
		}
	}()
	return s
}

// prepareDay gathers one day's minutes from the archive's readings and the new ones.
func (j *batchJudge) prepareDay(g *minute.Gatherer, day int64) prepared {
	last := day
	if g.Layout().LabelEnd {
		last++ // the day's last minute carries a stamp of the next day
	}
	var all minute.Batch
	if j.known {
		err := j.archive.ReadRaw(j.station.ID, day, last, func(b *minute.Batch) error {
			joinBatch(&all, b)
			return nil
		})
		if err != nil {
			return prepared{err: err}
		}
	}
	if b := j.fresh[day]; b != nil && all.Rows() == 0 && last == day {
		all = *b
	} else {
		for d := day; d <= last; d++ {
			if b := j.fresh[d]; b != nil {
				appendCopy(&all, b)
			}
		}
	}
	block := minute.NewBlock(day, len(g.Layout().Channels))
	g.Fill(block, &all, 0, minute.PerDay)
	judged := j.plan.NewJudged(day)
	j.plan.Prepare(judged, block, 0, block.Rows)
	return prepared{judged: judged, block: block}
}

// appendCopy appends b's readings to all without sharing memory with either's origin.
func appendCopy(all, b *minute.Batch) {
	for i := range b.Rows() {
		r := b.Reading(i)
		all.Append(&r)
	}
}
