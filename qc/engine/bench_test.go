package engine

import (
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

func perMinute(b *testing.B) {
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/minute.PerDay, "ns/minute")
}

// BenchmarkCore is the whole way of a day from its gathered minutes to its verdicts, three irradiances and three weather channels, on
// one core: sun, conversion, tests, the sequential stage with the diagnosis, summary and verdicts.
func BenchmarkCore(b *testing.B) {
	p, first, blocks := benchBlocks(b)
	judger := NewJudger(p, nil)
	j := p.NewJudged(first)
	var summaries []DaySummary
	for i := range benchDays { // what thirty days have taught
		judger.BeginWith(j)
		judger.Advance(blocks[i])
		summaries = append(summaries, judger.End())
		p.Reset(j, first+int64(i)+1)
	}
	b.ReportAllocs()
	b.ResetTimer()
	for i := range b.N {
		k := i % benchDays
		if k == 0 {
			judger = NewJudger(p, nil)
			judger.history = summaries[:0:0]
		}
		p.Reset(j, first+int64(k))
		judger.BeginWith(j)
		judger.Advance(blocks[k])
		judger.End()
		Settle(p, j, judger.Episodes())
	}
	perMinute(b)
}

// BenchmarkStages is BenchmarkCore by its parts.
func BenchmarkStages(b *testing.B) {
	p, first, blocks := benchBlocks(b)
	j := p.NewJudged(first)
	b.Run("sun", func(b *testing.B) {
		for i := range b.N {
			j.sun.fill(p, j, first+int64(i%benchDays))
		}
		perMinute(b)
	})
	b.Run("reset", func(b *testing.B) {
		for i := range b.N {
			p.Reset(j, first+int64(i%benchDays))
		}
		perMinute(b)
	})
	b.Run("prepare", func(b *testing.B) {
		for i := range b.N {
			p.Prepare(j, blocks[i%benchDays], 0, minute.PerDay)
		}
		perMinute(b)
	})
	judger := NewJudger(p, nil)
	b.Run("sequence_and_watcher", func(b *testing.B) {
		for i := range b.N {
			j.Day, j.Rows = first+int64(i%benchDays), 0
			judger.BeginWith(j)
			judger.AdvancePrepared(blocks[i%benchDays])
		}
		perMinute(b)
	})
	b.Run("watcher", func(b *testing.B) {
		p.Reset(j, first+14)
		p.Prepare(j, blocks[14], 0, minute.PerDay)
		judger.BeginWith(j)
		minutes := make([]fault.Minute, minute.PerDay)
		for r := range minutes {
			judger.sequence(r)
			minutes[r] = judger.minute
		}
		b.ResetTimer()
		for range b.N {
			w := fault.NewWatcher(p.setup, j.Day, nil, nil)
			for r := range minutes {
				w.Minute(&minutes[r])
			}
			w.EndDay()
		}
		perMinute(b)
	})
	j.Rows = minute.PerDay
	b.Run("settle", func(b *testing.B) {
		for range b.N {
			Settle(p, j, nil)
		}
		perMinute(b)
	})
}
