package store

import (
	"bytes"
	"fmt"
	"math"
	"math/rand/v2"
	"syscall"
	"testing"

	"fluxwarden/qc/minute"
	"fluxwarden/store/table"
	"fluxwarden/store/vfs"
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
	before := cpuSeconds()
	for b.Loop() {
		out.Reset()
		if err := w.Write(&out, t); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(out.Len())/float64(t.Rows), "B/row")
	b.ReportMetric(float64(t.Rows)*float64(b.N)/b.Elapsed().Seconds()/1000, "krows/s")
	b.ReportMetric(float64(t.Rows)*float64(b.N)/(cpuSeconds()-before)/1000, "krows/cpu-s")
}

// cpuSeconds is the processor time that the process has used: on a busy machine the elapsed time says little.
func cpuSeconds() float64 {
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		return math.NaN()
	}
	return float64(u.Utime.Nano()+u.Stime.Nano()) / 1e9
}

// BenchmarkOpenTenYears opens an archive of 100 stations and ten years to write, with a checkpoint for each partition.
func BenchmarkOpenTenYears(b *testing.B) {
	m := vfs.NewMem()
	a, err := OpenForWriting(m, "/archive", Options{})
	if err != nil {
		b.Fatal(err)
	}
	files := 0
	for s := range 100 {
		p := a.parts[s%Partitions]
		r := Record{Partition: s % Partitions, Number: p.last.Number + 1}
		for month := range 120 {
			for _, t := range []string{TableRaw, TableMinutes, TableState} {
				f := File{Table: t, Station: fmt.Sprint("station", s), Period: monthOf(day0 - 3650 + int64(month)*3650/120), SHA256: sha([]byte{byte(s), byte(month)}), Bytes: 1e6, Rows: 44_640, Sealed: true}
				f.Path = treeDir(t, f.Station, f.Period) + "/" + f.Station + "_" + f.Period + "_e1_c7_0123456789ab.parquet"
				r.Files = append(r.Files, f)
			}
		}
		p.fold(&r, "")
		files += len(r.Files)
	}
	for i, p := range a.parts {
		p.last.Files = nil // as after a small commit
		if err := a.checkpoint(i, p); err != nil {
			b.Fatal(err)
		}
	}
	if err := a.lock.Close(); err != nil {
		b.Fatal(err)
	}
	for b.Loop() {
		a, err := OpenForWriting(m, "/archive", Options{})
		if err != nil {
			b.Fatal(err)
		}
		if len(a.Stations()) != 100 {
			b.Fatal("stations missing")
		}
		a.lock.Close()
	}
	b.ReportMetric(float64(files), "files")
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
