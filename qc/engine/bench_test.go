//go:build unix

package engine

import (
	"syscall"
	"testing"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
)

// benchDays is how many days the benchmarks go round.
const benchDays = 30

func benchBlocks(b *testing.B) (*Plan, int64, []*minute.Block) {
	p := planOf(b, fieldText)
	first := dayOf(b, "2026-05-01")
	batch := inventedDays(p, first, benchDays, 3, false)
	blocks := make([]*minute.Block, benchDays)
	for i := range blocks {
		blocks[i] = blockOf(p, batch, first+int64(i))
	}
	return p, first, blocks
}

// perMinute starts to count; the function that it gives reports the time of the process's own work for a minute, so that a busy machine
// does not count.
func perMinute(b *testing.B) func() {
	used := func() int64 {
		var u syscall.Rusage
		if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
			b.Fatal(err)
		}
		return u.Utime.Nano() + u.Stime.Nano()
	}
	b.ReportAllocs()
	b.ResetTimer()
	before := used()
	return func() {
		b.ReportMetric(float64(used()-before)/float64(b.N)/minute.PerDay, "cpu-ns/minute")
		b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/minute.PerDay, "ns/minute")
	}
}

// BenchmarkCore is the whole way of a day from its gathered minutes to its verdicts, three irradiances and three weather channels, on
// one core: sun, conversion, tests, the sequential stage with the diagnosis, summary and verdicts.
func BenchmarkCore(b *testing.B) {
	p, first, blocks := benchBlocks(b)
	judger := NewJudger(p, nil)
	j := p.NewJudged(first)
	defer perMinute(b)()
	for i := range b.N {
		k := i % benchDays
		if k == 0 {
			judger = NewJudger(p, nil) // the same days come again
		}
		p.Reset(j, first+int64(k))
		judger.BeginWith(j)
		judger.Advance(blocks[k])
		judger.End()
		Settle(p, j, judger.Episodes())
	}
}

// BenchmarkStages is BenchmarkCore by its parts.
func BenchmarkStages(b *testing.B) {
	p, first, blocks := benchBlocks(b)
	j := p.NewJudged(first)
	b.Run("sun", func(b *testing.B) {
		defer perMinute(b)()
		for i := range b.N {
			j.sun.fill(p, j, first+int64(i%benchDays))
		}
	})
	b.Run("reset", func(b *testing.B) {
		defer perMinute(b)()
		for i := range b.N {
			p.Reset(j, first+int64(i%benchDays))
		}
	})
	b.Run("prepare", func(b *testing.B) {
		defer perMinute(b)()
		for i := range b.N {
			p.Prepare(j, blocks[i%benchDays], 0, minute.PerDay)
		}
	})
	judger := NewJudger(p, nil)
	b.Run("sequence", func(b *testing.B) {
		judger.BeginWith(j)
		defer perMinute(b)()
		for range b.N {
			for r := range minute.PerDay {
				judger.sequence(r)
			}
		}
	})
	b.Run("sequence_and_watcher", func(b *testing.B) {
		defer perMinute(b)()
		for i := range b.N {
			j.Day, j.Rows = first+int64(i%benchDays), 0
			judger.BeginWith(j)
			judger.AdvancePrepared(blocks[i%benchDays])
		}
	})
	b.Run("watcher", func(b *testing.B) {
		p.Reset(j, first+14)
		p.Prepare(j, blocks[14], 0, minute.PerDay)
		judger.BeginWith(j)
		minutes := make([]fault.Minute, minute.PerDay)
		for r := range minutes {
			judger.sequence(r)
			judger.watch(r)
			minutes[r] = judger.minute
		}
		defer perMinute(b)()
		for range b.N {
			w := fault.NewWatcher(p.setup, j.Day, nil, nil)
			for r := range minutes {
				w.Minute(&minutes[r])
			}
			w.EndDay()
		}
	})
	j.Rows = minute.PerDay
	b.Run("settle", func(b *testing.B) {
		defer perMinute(b)()
		for range b.N {
			Settle(p, j, nil)
		}
	})
}
