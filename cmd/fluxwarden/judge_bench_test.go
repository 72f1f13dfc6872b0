package main

import (
	"bufio"
	"fmt"
	"io/fs"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

const benchSite = `network: {id: bench, name: A year to be judged}
stations:
  - id: yard
    name: Yard
    latitude: 55.0
    longitude: 12.0
    elevation: 50
    instruments:
      - {id: G1, measures: global, class: A, input: {signal: g1_mv, unit: mV}, calibrations: [{from: 2010-01-01, sensitivity: 8.62, unit: uV/(W/m2), uncertainty: 1.2%}]}
      - {id: P1, measures: direct, input: {signal: p1_mv, unit: mV}, calibrations: [{from: 2010-01-01, sensitivity: 9.17, unit: uV/(W/m2), uncertainty: 1.2%}]}
      - {id: D1, measures: diffuse, class: A, input: {signal: d1_mv, unit: mV}, calibrations: [{from: 2010-01-01, sensitivity: 8.11, unit: uV/(W/m2), uncertainty: 1.2%}]}
    weather: {air_temperature: ta_c, humidity: rh_pct, pressure: p_hpa}
`

// BenchmarkJudgeYear is judge of 525,600 minutes (three irradiances, three weather channels) from CSV to a finished archive.
func BenchmarkJudgeYear(b *testing.B) {
	dir := b.TempDir()
	site, readings := filepath.Join(dir, "site.yaml"), filepath.Join(dir, "year.csv")
	if err := os.WriteFile(site, []byte(benchSite), 0o644); err != nil {
		b.Fatal(err)
	}
	const minutes = 525_600
	writeYear(b, readings, minutes)
	quiet, err := os.OpenFile(os.DevNull, os.O_WRONLY, 0)
	if err != nil {
		b.Fatal(err)
	}
	said := os.Stderr
	os.Stderr = quiet
	defer func() { os.Stderr = said }()
	var archive string
	b.ResetTimer()
	for i := range b.N {
		archive = filepath.Join(dir, fmt.Sprintf("archive%d", i))
		if code := cmdJudge([]string{"--site", site, "--archive", archive, readings}); code != exitOK {
			b.Fatalf("judge gave %d", code)
		}
	}
	b.StopTimer()
	b.ReportMetric(float64(minutes)*float64(b.N)/b.Elapsed().Seconds(), "minutes/s")
	b.ReportMetric(float64(bytesUnder(b, filepath.Join(archive, "minutes")))/minutes, "bytes/minute")
}

// writeYear writes a station's readings with a plain sun, clouds that wander and noise.
func writeYear(b *testing.B, name string, minutes int) {
	f, err := os.Create(name)
	if err != nil {
		b.Fatal(err)
	}
	w := bufio.NewWriterSize(f, 1<<20)
	fmt.Fprintln(w, "time,g1_mv,p1_mv,d1_mv,ta_c,rh_pct,p_hpa")
	r := rand.New(rand.NewPCG(1, 2))
	cloud := 0.5
	begin := time.Date(2025, 1, 1, 0, 0, 0, 0, time.UTC)
	for i := range minutes {
		day, hour := float64(i)/1440, math.Mod(float64(i)/60, 24)
		dec := -0.409 * math.Cos(2*math.Pi*(day+10)/365)
		const lat = 55 * math.Pi / 180
		mu := math.Max(0, math.Sin(lat)*math.Sin(dec)+math.Cos(lat)*math.Cos(dec)*math.Cos(math.Pi*(hour-11.2)/12))
		cloud = math.Max(0, math.Min(1, cloud+0.02*r.NormFloat64()))
		direct := 900 * (1 - cloud) * (1 - math.Exp(-8*mu))
		diffuse := mu * (100 + 300*cloud)
		global := direct*mu + diffuse
		fmt.Fprintf(w, "%s,%.4f,%.4f,%.4f,%.1f,%.1f,%d\n", begin.Add(time.Duration(i)*time.Minute).Format("2006-01-02T15:04:05Z"),
			(global*8.62+4*r.NormFloat64())/1000, (direct*9.17+4*r.NormFloat64())/1000, (diffuse*8.11+4*r.NormFloat64())/1000,
			10+5*math.Sin(hour/24*2*math.Pi)+0.1*r.NormFloat64(), 70+r.NormFloat64(), 1013)
	}
	if err := w.Flush(); err != nil {
		b.Fatal(err)
	}
	if err := f.Close(); err != nil {
		b.Fatal(err)
	}
}

func bytesUnder(b *testing.B, dir string) (total int64) {
	err := filepath.WalkDir(dir, func(name string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() || !strings.HasSuffix(name, ".parquet") {
			return err
		}
		info, err := d.Info()
		total += info.Size()
		return err
	})
	if err != nil {
		b.Fatal(err)
	}
	return total
}
