package main

import (
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"testing"
	"time"

	"fluxwarden/ingest/broker"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/synth"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// Stations side by side, two of them in one partition: each is judged as if it were alone, and a schedule that a daemon has left says
// afterwards that the new rules hold for the past.
func TestRejudgeOfANetwork(t *testing.T) {
	b := newYard(t, 3)
	ids := []string{"yard"}
	for i := 0; len(ids) < 4; i++ {
		id := fmt.Sprintf("plot%d", i)
		if same := broker.PartitionOf(id) == broker.PartitionOf("yard"); same || len(ids) < 3 {
			ids = append(ids, id)
		}
	}
	network := func(sensitivity string) string {
		one := yard("start", "2026-06-02", sensitivity)
		head, station, _ := strings.Cut(one, "  - id: yard")
		for _, id := range ids {
			head += "  - id: " + id + station
		}
		return head
	}
	b.write("site.yaml", network("8.62"))
	archive := filepath.Join(b.dir, "archive")
	for _, id := range ids {
		b.judge(archive, append([]string{"--station", id}, b.days...)...)
	}
	old, err := rules.Load(b.site)
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(archive, "rules/schedule.json"), fmt.Appendf(nil, `[{"from":"2026-06-01","digest":%q}]`, old.Digest), 0o644); err != nil {
		t.Fatal(err)
	}
	b.write("site.yaml", network("8.70"))
	code, out, said := b.run(cmdRejudge, "--site", b.site, "--archive", archive, "--yes", "--json")
	if code != exitOK || strings.Count(out, `"days":2,"first_day":"2026-06-02"`) != len(ids) {
		t.Fatalf("%d %s%s", code, out, said)
	}
	a, err := store.Open(vfs.OS{}, archive)
	if err != nil {
		t.Fatal(err)
	}
	first, _ := time.Parse(time.DateOnly, yardFirst)
	for d := range int64(3) {
		want, _ := a.RowDigest("yard", first.Unix()/86400+d)
		for _, id := range ids {
			if got, err := a.RowDigest(id, first.Unix()/86400+d); err != nil || got != want {
				t.Errorf("%s, day %d: %s %v, want %s", id, d, got, err, want)
			}
		}
	}
	now, err := rules.Load(b.site)
	if err != nil {
		t.Fatal(err)
	}
	if list, err := a.Schedule(); err != nil || len(list) != 1 || list[0].Digest != now.Digest || list[0].From != "2026-06-01" {
		t.Errorf("schedule %v %v", list, err)
	}
	if code, out, said := b.run(cmdVerify, "--archive", archive); code != exitOK {
		t.Errorf("verify: %s%s", out, said)
	}
}

func TestScheduleFrom(t *testing.T) {
	old := []store.RulesFrom{{From: "2026-01-01", Digest: "a"}, {From: "2026-05-01", Digest: "b"}}
	day := func(text string) int64 {
		d, err := time.Parse(time.DateOnly, text)
		if err != nil {
			t.Fatal(err)
		}
		return d.Unix() / 86400
	}
	for _, c := range []struct {
		from, digest, want string
	}{
		{"", "c", "[{2026-01-01 c}]"},
		{"2026-06-11", "c", "[{2026-01-01 a} {2026-05-01 b} {2026-06-01 c}]"},
		{"2026-06-11", "b", "[{2026-01-01 a} {2026-05-01 b}]"},
		{"2026-04-11", "c", "[{2026-01-01 a} {2026-04-01 c}]"},
		{"2025-06-11", "c", "[{1970-01-01 a} {2025-06-01 c}]"},
	} {
		from := int64(-1 << 31)
		if c.from != "" {
			from = day(c.from)
		}
		if got := fmt.Sprint(scheduleFrom(old, from, c.digest)); got != c.want {
			t.Errorf("from %q, %s: %s, want %s", c.from, c.digest, got, c.want)
		}
	}
}

// The memory that rejudge holds does not grow with the archive: after three times the months it is about the same.
func TestRejudgeMemoryIsFlat(t *testing.T) {
	if testing.Short() {
		t.Skip("judges eight months")
	}
	b := newYard(t, 0)
	site, err := rules.Load(b.site)
	if err != nil {
		t.Fatal(err)
	}
	st := synth.New(&site.Stations[0], 7, synth.ClimateFor(&site.Stations[0]))
	begin, _ := time.Parse(time.DateOnly, "2025-01-01")
	peak := func(months int) uint64 {
		archive := filepath.Join(b.dir, fmt.Sprint("archive", months))
		var files []string
		for m := range months {
			from, to := begin.AddDate(0, m, 0), begin.AddDate(0, m+1, 0)
			files = append(files, b.write(fmt.Sprintf("m%02d.csv", m), dayCSV(st, minute.Stamp(from.UnixMicro()), minute.Stamp(to.UnixMicro()))))
		}
		b.write("site.yaml", yard("start", "2025-01-02", "8.62"))
		b.judge(archive, files...)
		b.write("site.yaml", yard("start", "2025-01-02", "8.70"))
		runtime.GC()
		stop, most := make(chan struct{}), make(chan uint64)
		go func() {
			worst := uint64(0)
			tick := time.NewTicker(5 * time.Millisecond)
			defer tick.Stop()
			for {
				select {
				case <-stop:
					most <- worst
					return
				case <-tick.C:
					var s runtime.MemStats
					runtime.ReadMemStats(&s)
					worst = max(worst, s.HeapInuse)
				}
			}
		}()
		code, _, said := b.run(cmdRejudge, "--site", b.site, "--archive", archive, "--yes")
		close(stop)
		if code != exitOK {
			t.Fatal(said)
		}
		return <-most
	}
	short, long := peak(2), peak(6)
	t.Logf("2 months: %d MiB; 6 months: %d MiB", short>>20, long>>20)
	if long > short+short/2 {
		t.Errorf("6 months need %d MiB, 2 months %d MiB", long>>20, short>>20)
	}
}
