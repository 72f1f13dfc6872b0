package main

import (
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"
)

// BenchmarkRejudgeYear is rejudge of 525,600 minutes (three irradiances, three weather channels) from raw Parquet: by the same rules,
// where nothing is written, and by another sensitivity, where a year is written anew.
func BenchmarkRejudgeYear(b *testing.B) {
	const minutes = 525_600
	dir := b.TempDir()
	site, readings, archive := filepath.Join(dir, "site.yaml"), filepath.Join(dir, "year.csv"), filepath.Join(dir, "archive")
	writeSite := func(sensitivity string) {
		if err := os.WriteFile(site, []byte(strings.Replace(benchSite, "sensitivity: 8.62", "sensitivity: "+sensitivity, 1)), 0o644); err != nil {
			b.Fatal(err)
		}
	}
	quiet, err := os.OpenFile(os.DevNull, os.O_WRONLY, 0)
	if err != nil {
		b.Fatal(err)
	}
	out, said := os.Stdout, os.Stderr
	os.Stdout, os.Stderr = quiet, quiet
	defer func() { os.Stdout, os.Stderr = out, said }()
	writeSite("8.62")
	writeYear(b, readings, minutes)
	if code := cmdJudge([]string{"--site", site, "--archive", archive, readings}); code != exitOK {
		b.Fatalf("judge gave %d", code)
	}
	runs := 0
	for _, bench := range []struct {
		name          string
		sensitivities []string
	}{{"same rules", []string{"8.62"}}, {"another sensitivity", []string{"8.70", "8.62"}}} {
		b.Run(bench.name, func(b *testing.B) {
			busy := processorSeconds(b)
			for range b.N {
				writeSite(bench.sensitivities[runs%len(bench.sensitivities)])
				runs++
				if code := cmdRejudge([]string{"--site", site, "--archive", archive, "--yes"}); code != exitOK {
					b.Fatalf("rejudge gave %d", code)
				}
			}
			b.ReportMetric((processorSeconds(b)-busy)/float64(b.N), "cpu-s/op")
			b.ReportMetric(minutes*float64(b.N)/b.Elapsed().Seconds(), "minutes/s")
		})
	}
}

// processorSeconds is the time that the process has used on all processors: what a loaded machine does not change.
func processorSeconds(b *testing.B) float64 {
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		b.Fatal(err)
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano()).Seconds()
}
