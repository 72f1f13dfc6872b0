package store

import (
	"bytes"
	"math/rand/v2"
	"testing"

	"fluxwarden/qc/minute"
	"fluxwarden/store/table"
)

// BenchmarkMonth writes the 43,200 minutes of a station with three irradiances and three weather channels into one file in memory. It reports
// the bytes a minute and the thousand rows a second.
func BenchmarkMonth(b *testing.B) { benchmarkMinutes(b, 30) }

// BenchmarkDay does the same with the file of a day.
func BenchmarkDay(b *testing.B) { benchmarkMinutes(b, 1) }

func benchmarkMinutes(b *testing.B, days int64) {
	rng := rand.New(rand.NewPCG(3, 4))
	t := table.NewMinutes(int(days) * minute.PerDay)
	for d := range days {
		table.Append(t, madeDay("northmoor", day0+d, rng), int(d)*minute.PerDay)
	}
	w := table.NewWriter(table.MinuteColumns())
	var out bytes.Buffer
	for b.Loop() {
		out.Reset()
		if err := w.Write(&out, t); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(out.Len())/float64(t.Rows), "B/row")
	b.ReportMetric(float64(t.Rows)*float64(b.N)/b.Elapsed().Seconds()/1000, "krows/s")
}

func BenchmarkRound(b *testing.B) {
	j := madeDay("northmoor", day0, rand.New(rand.NewPCG(3, 4)))
	for b.Loop() {
		table.FromJudged(j)
	}
}

func BenchmarkDigest(b *testing.B) {
	t := table.FromJudged(madeDay("northmoor", day0, rand.New(rand.NewPCG(3, 4))))
	for b.Loop() {
		table.Digest(t, 0, t.Rows)
	}
}

func BenchmarkReadMonth(b *testing.B) {
	rng := rand.New(rand.NewPCG(3, 4))
	t := table.NewMinutes(30 * minute.PerDay)
	for d := range int64(30) {
		table.Append(t, madeDay("northmoor", day0+d, rng), int(d)*minute.PerDay)
	}
	var out bytes.Buffer
	if err := table.NewWriter(t.Columns).Write(&out, t); err != nil {
		b.Fatal(err)
	}
	for b.Loop() {
		if _, err := table.Read(bytes.NewReader(out.Bytes()), int64(out.Len()), nil); err != nil {
			b.Fatal(err)
		}
	}
}
