package export

import (
	"bytes"
	"io"
	"syscall"
	"testing"
	"time"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/synth"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// tenYears is an archive of one station on a real disk: ten years of month files, each of a judged synthetic month's days.
func tenYears(b *testing.B) string {
	b.Helper()
	site, err := rules.Load("../../testdata/site/northmoor.yaml")
	if err != nil {
		b.Fatal(err)
	}
	st := &site.Stations[0]
	plan, err := engine.NewPlan(st)
	if err != nil {
		b.Fatal(err)
	}
	dir := b.TempDir() + "/archive"
	a, err := store.OpenForWriting(vfs.OS{}, dir, store.Options{})
	if err != nil {
		b.Fatal(err)
	}
	made := synth.New(st, 1, synth.ClimateFor(st))
	judger, gatherer := engine.NewJudger(plan, nil), minute.NewGatherer(plan.Layout())
	block := minute.NewBlock(0, len(plan.Layout().Channels))
	var days []*engine.Judged // a fortnight, which the months repeat: judging ten years would take longer than what is measured
	for day := int64(20_605); day < 20_605+14; day++ {
		readings := &minute.Batch{}
		for at := minute.Stamp(day * minute.MicrosPerDay); at <= minute.Stamp((day+1)*minute.MicrosPerDay); at += made.Interval() {
			if r := made.Reading(at); len(r.Values) > 0 {
				readings.Append(&r)
			}
		}
		block.Reset(day)
		gatherer.Fill(block, readings, 0, minute.PerDay)
		j := judger.Begin(day)
		judger.Advance(block)
		judger.End()
		engine.Settle(plan, j, nil)
		days = append(days, j)
	}
	c := &store.Commit{Site: site, RulesDigest: site.Digest}
	for month := time.Date(2016, 1, 1, 0, 0, 0, 0, time.UTC); month.Year() < 2026; month = month.AddDate(0, 1, 0) {
		m := store.NewMonth(st.ID, month.Format("2006-01"))
		for day := month; day.Month() == month.Month(); day = day.AddDate(0, 0, 1) {
			j := *days[(day.Day()-1)%len(days)]
			j.Day = day.Unix() / 86400
			if err := m.Add(&j); err != nil {
				b.Fatal(err)
			}
		}
		c.Months = []*store.Month{m}
		if _, err := a.Commit(c); err != nil {
			b.Fatal(err)
		}
		last, _, err := a.Last(0)
		if err != nil {
			b.Fatal(err)
		}
		c.Base = last.Number
	}
	if err := a.Close(); err != nil {
		b.Fatal(err)
	}
	return dir
}

// BenchmarkMonthOfTenYears exports one quantity of one month out of ten station-years, with the opening of the archive.
func BenchmarkMonthOfTenYears(b *testing.B) {
	dir := tenYears(b)
	from := time.Date(2021, 6, 1, 0, 0, 0, 0, time.UTC).Unix() / 60
	for _, x := range []struct {
		name  string
		write func(io.Writer, *store.Archive, Request) (int, error)
	}{{"csv", CSV}, {"netcdf", NetCDF}, {"parquet", Parquet}} {
		b.Run(x.name, func(b *testing.B) {
			before := cpuSeconds(b)
			for b.Loop() {
				a, err := store.Open(vfs.OS{}, dir)
				if err != nil {
					b.Fatal(err)
				}
				var out bytes.Buffer
				rows, err := x.write(&out, a, Request{Station: "northmoor", Product: "minutes", From: from, To: from + 30*minute.PerDay, Quantities: []string{"global"}})
				if err != nil || rows != 30*minute.PerDay {
					b.Fatal(rows, err)
				}
			}
			b.ReportMetric(1e3*(cpuSeconds(b)-before)/float64(b.N), "cpu-ms/op")
		})
	}
}

// cpuSeconds is the process's CPU time: a wall time says little on a machine that others use.
func cpuSeconds(b *testing.B) float64 {
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		b.Fatal(err)
	}
	return float64(u.Utime.Nano()+u.Stime.Nano()) / 1e9
}
