package main

import (
	"bytes"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"fluxwarden/ingest/broker"
	"fluxwarden/qc/engine"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/synth"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

const yardSite = `network: {id: bench, name: A yard to be judged}
stations:
  - id: yard
    name: Yard
    latitude: 55.0
    longitude: 12.0
    elevation: 50
    time: {label: LABEL, interval: 60s}
    instruments:
      - {id: G1, measures: global, class: A, input: {signal: g1_mv, unit: mV}, calibrations: [{from: 2010-01-01, to: CHANGE, sensitivity: 8.62, unit: uV/(W/m2), uncertainty: 1.2%}, {from: CHANGE, sensitivity: SENSITIVITY, unit: uV/(W/m2), uncertainty: 1.2%}]}
      - {id: P1, measures: direct, input: {signal: p1_mv, unit: mV}, calibrations: [{from: 2010-01-01, sensitivity: 9.17, unit: uV/(W/m2), uncertainty: 1.2%}]}
      - {id: D1, measures: diffuse, class: A, input: {signal: d1_mv, unit: mV}, calibrations: [{from: 2010-01-01, sensitivity: 8.11, unit: uV/(W/m2), uncertainty: 1.2%}]}
    weather: {air_temperature: ta_c, humidity: rh_pct, pressure: p_hpa}
`

// yard is the site file of a station whose global's sensitivity changes on a day.
func yard(label, change, sensitivity string) string {
	return strings.NewReplacer("LABEL", label, "CHANGE", change, "SENSITIVITY", sensitivity).Replace(yardSite)
}

// A yardBed is a folder with a site file and readings of some days, each in a file of its own.
type yardBed struct {
	t    testing.TB
	dir  string
	site string
	days []string
}

const yardFirst = "2026-06-01"

func newYard(t testing.TB, days int, faults ...synth.Fault) *yardBed {
	b := &yardBed{t: t, dir: t.TempDir()}
	b.site = b.write("site.yaml", yard("start", "2026-06-08", "8.62"))
	site, err := rules.Load(b.site)
	if err != nil {
		t.Fatal(err)
	}
	st := synth.New(&site.Stations[0], 7, synth.ClimateFor(&site.Stations[0]))
	for _, f := range faults {
		if err := st.AddFault(f); err != nil {
			t.Fatal(err)
		}
	}
	first, err := time.Parse(time.DateOnly, yardFirst)
	if err != nil {
		t.Fatal(err)
	}
	for d := range days {
		begin := minute.Stamp(first.AddDate(0, 0, d).UnixMicro())
		b.days = append(b.days, b.write(fmt.Sprintf("day%02d.csv", d), dayCSV(st, begin, begin+minute.MicrosPerDay)))
	}
	return b
}

// dayCSV is a station's readings as a file.
func dayCSV(st *synth.Station, from, to minute.Stamp) string {
	names := []string{"g1_mv", "p1_mv", "d1_mv", "ta_c", "rh_pct", "p_hpa"}
	var b strings.Builder
	fmt.Fprintln(&b, "time,"+strings.Join(names, ","))
	for at := st.Next(from); at < to; at = st.Next(at + 1) {
		r := st.Reading(at)
		b.WriteString(time.UnixMicro(int64(at)).UTC().Format(time.RFC3339))
		for _, name := range names {
			b.WriteByte(',')
			for i := range r.Values {
				if v := &r.Values[i]; v.Channel == name && !math.IsNaN(v.Mean) {
					fmt.Fprintf(&b, "%.4f", v.Mean)
				}
			}
		}
		b.WriteByte('\n')
	}
	return b.String()
}

func (b *yardBed) write(name, text string) string {
	b.t.Helper()
	path := filepath.Join(b.dir, name)
	if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
		b.t.Fatal(err)
	}
	return path
}

// run runs a command quietly and gives its code and what it said.
func (b *yardBed) run(f func([]string) int, args ...string) (code int, stdout, stderr string) {
	b.t.Helper()
	out, err := os.CreateTemp(b.t.TempDir(), "out")
	if err != nil {
		b.t.Fatal(err)
	}
	said, err := os.CreateTemp(b.t.TempDir(), "err")
	if err != nil {
		b.t.Fatal(err)
	}
	oldOut, oldErr := os.Stdout, os.Stderr
	os.Stdout, os.Stderr = out, said
	defer func() { os.Stdout, os.Stderr = oldOut, oldErr }()
	code = f(args)
	x, _ := os.ReadFile(out.Name())
	y, _ := os.ReadFile(said.Name())
	return code, string(x), string(y)
}

func (b *yardBed) judge(archive string, files ...string) {
	b.t.Helper()
	code, _, said := b.run(cmdJudge, append([]string{"--site", b.site, "--archive", archive}, files...)...)
	if code != exitOK {
		b.t.Fatalf("judge gave %d: %s", code, said)
	}
}

// digests lists the row digests of an archive's days, and its episodes.
func (b *yardBed) digests(archive string) (days []string, episodes string) {
	b.t.Helper()
	a, err := store.Open(vfs.OS{}, archive)
	if err != nil {
		b.t.Fatal(err)
	}
	first, _ := time.Parse(time.DateOnly, yardFirst)
	for d := range int64(len(b.days)) {
		digest, err := a.RowDigest("yard", first.Unix()/86400+d)
		if err != nil {
			b.t.Fatal(err)
		}
		days = append(days, digest)
	}
	list, err := a.Faults("yard")
	if err != nil {
		b.t.Fatal(err)
	}
	found, err := a.Verify(nil)
	if err != nil || len(found) > 0 {
		b.t.Fatalf("%s: %v %v", archive, found, err)
	}
	return days, fmt.Sprintf("%+v", list)
}

// tree is all files of an archive but the lock, with their bytes' digests.
func tree(t testing.TB, dir string) string {
	var b bytes.Buffer
	err := filepath.WalkDir(dir, func(name string, d os.DirEntry, err error) error {
		if err != nil || d.IsDir() || d.Name() == "lock" {
			return err
		}
		text, err := os.ReadFile(name)
		fmt.Fprintf(&b, "%s %d %x\n", name, len(text), text[max(0, len(text)-64):])
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return b.String()
}

func yardFaults(t testing.TB) []synth.Fault {
	at := func(text string) minute.Stamp {
		v, err := time.Parse(time.RFC3339, text)
		if err != nil {
			t.Fatal(err)
		}
		return minute.Stamp(v.UnixMicro())
	}
	return []synth.Fault{
		{Kind: rules.SignalLost, Instrument: "P1", From: at("2026-06-04T09:00:00Z"), To: at("2026-06-05T14:00:00Z")},
		{Kind: rules.ShadeOff, Instrument: "D1", From: at("2026-06-09T08:00:00Z"), To: at("2026-06-09T13:00:00Z")},
	}
}

// Judging the same files in one run or in several, in any order and cut anywhere, comes to the same rows and episodes.
func TestJudgeInAnyOrderComesToTheSame(t *testing.T) {
	b := newYard(t, 14, yardFaults(t)...)
	whole := filepath.Join(b.dir, "whole")
	b.judge(whole, b.days...)
	want, wantEpisodes := b.digests(whole)
	if wantEpisodes == "[]" {
		t.Fatal("the readings show no episode: the test would prove little")
	}
	for seed := range uint64(4) {
		r := rand.New(rand.NewPCG(seed, 4))
		archive := filepath.Join(b.dir, fmt.Sprintf("archive%d", seed))
		files := slices.Clone(b.days)
		r.Shuffle(len(files), func(i, k int) { files[i], files[k] = files[k], files[i] })
		for len(files) > 0 {
			k := 1 + r.IntN(len(files))
			b.judge(archive, files[:k]...)
			files = files[k:]
		}
		got, episodes := b.digests(archive)
		for d := range want {
			if got[d] != want[d] {
				t.Errorf("seed %d, day %d: digest %s, in one run %s", seed, d, got[d], want[d])
			}
		}
		if episodes != wantEpisodes {
			t.Errorf("seed %d: episodes\n%s\nin one run\n%s", seed, episodes, wantEpisodes)
		}
	}
}

// With the same rules nothing changes and no byte is written, whatever part is judged again.
func TestRejudgeBySameRulesWritesNothing(t *testing.T) {
	for _, label := range []string{"start", "end"} {
		b := newYard(t, 14, yardFaults(t)...)
		b.write("site.yaml", yard(label, "2026-06-08", "8.62"))
		archive := filepath.Join(b.dir, "archive")
		b.judge(archive, b.days[:9]...)
		b.judge(archive, b.days[9:]...)
		before := tree(t, archive)
		for _, extra := range [][]string{nil, {"--from", "2026-06-06"}, {"--to", "2026-06-03"}, {"--from", "2026-06-03", "--to", "2026-06-04"}} {
			code, out, said := b.run(cmdRejudge, append([]string{"--site", b.site, "--archive", archive, "--yes"}, extra...)...)
			if code != exitOK || !strings.Contains(said, "nothing changes") {
				t.Errorf("%s %v: %d %s %s", label, extra, code, out, said)
			}
			if after := tree(t, archive); after != before {
				t.Errorf("%s %v: the archive was\n%s\nis\n%s", label, extra, before, after)
			}
		}
	}
}

// A corrected sensitivity scales the values from the calibration's start on and leaves every row before it alone.
func TestRejudgeScalesFromTheCalibrationOn(t *testing.T) {
	b := newYard(t, 14)
	archive := filepath.Join(b.dir, "archive")
	b.judge(archive, b.days...)
	before, _ := b.digests(archive)
	values := b.global(archive)
	tr := tree(t, archive)
	b.write("site.yaml", yard("start", "2026-06-08", "8.70"))

	code, out, said := b.run(cmdRejudge, "--site", b.site, "--archive", archive, "--dry-run")
	if code != exitOK || !strings.Contains(out, "7 days change, 2026-06-08 to 2026-06-14 (new calibration of G1 from 2026-06-08)") {
		t.Errorf("dry run: %d\n%s%s", code, out, said)
	}
	code, _, said = b.run(cmdRejudge, "--site", b.site, "--archive", archive)
	if code != exitProblem || !strings.Contains(said, "--yes") {
		t.Errorf("without a terminal: %d %s", code, said)
	}
	if after := tree(t, archive); after != tr {
		t.Errorf("unasked, the archive was\n%s\nis\n%s", tr, after)
	}
	if code, out, said = b.run(cmdRejudge, "--site", b.site, "--archive", archive, "--yes"); code != exitOK {
		t.Fatalf("rejudge: %d\n%s%s", code, out, said)
	}
	after, _ := b.digests(archive)
	for d := range before {
		if same := before[d] == after[d]; same != (d < 7) {
			t.Errorf("day %d: same rows is %v", d, same)
		}
	}
	scaled := 0
	if len(values) != 14*minute.PerDay {
		t.Fatalf("%d minutes", len(values))
	}
	now := b.global(archive)
	for i, x := range values {
		want := x
		if i >= 7*minute.PerDay {
			want = x * 8.62 / 8.70
		}
		if math.Abs(now[i]-want) > 1.0/64 {
			t.Fatalf("minute %d: %v, want %v", i, now[i], want)
		}
		if now[i] != x {
			scaled++
		}
	}
	if scaled < 3000 {
		t.Errorf("only %d values changed", scaled)
	}
	old, err := filepath.Glob(filepath.Join(archive, "superseded/minutes/station=yard/month=2026-06/*.parquet"))
	if err != nil || len(old) != 1 {
		t.Errorf("superseded: %v %v", old, err)
	}
	if code, _, said = b.run(cmdRejudge, "--site", b.site, "--archive", archive, "--yes"); code != exitOK || !strings.Contains(said, "nothing changes") {
		t.Errorf("once more: %d %s", code, said)
	}
	// The archive is what judging everything by the new rules makes of it.
	anew := filepath.Join(b.dir, "anew")
	b.judge(anew, b.days...)
	if want, _ := b.digests(anew); fmt.Sprint(want) != fmt.Sprint(after) {
		t.Errorf("rejudged %v, judged anew %v", after, want)
	}
}

// global reads the values of the archive's global irradiance.
func (b *yardBed) global(archive string) []float64 {
	b.t.Helper()
	a, err := store.Open(vfs.OS{}, archive)
	if err != nil {
		b.t.Fatal(err)
	}
	var out []float64
	if err := a.ReadMinutes("yard", 0, 1<<40, []string{"global"}, func(r *store.Rows) error {
		out = append(out, r.Find("global").Doubles...)
		return nil
	}); err != nil {
		b.t.Fatal(err)
	}
	return out
}

func mustRead(t testing.TB, name string) string {
	text, err := os.ReadFile(name)
	if err != nil {
		t.Fatal(err)
	}
	return string(text)
}

// An archive that another program writes to is refused, with who that is; a missing one is not made; a read-only one says so.
func TestRejudgeRefusals(t *testing.T) {
	b := newYard(t, 2)
	archive := filepath.Join(b.dir, "archive")
	if code, _, said := b.run(cmdRejudge, "--site", b.site, "--archive", archive); code != exitProblem || !strings.Contains(said, "no archive.json there") {
		t.Errorf("no archive: %d %s", code, said)
	}
	if _, err := os.Stat(archive); err == nil {
		t.Error("an archive was made")
	}
	b.judge(archive, b.days...)
	a, err := store.OpenForWriting(vfs.OS{}, archive, store.Options{Owner: "fluxwarden run, process 4711"})
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		run  func([]string) int
		more []string
	}{{cmdRejudge, nil}, {cmdJudge, b.days[:1]}} {
		code, _, said := b.run(c.run, append([]string{"--site", b.site, "--archive", archive}, c.more...)...)
		if code != exitProblem || !strings.Contains(said, "process 4711") {
			t.Errorf("a held archive: %d %s", code, said)
		}
	}
	if code, _, said := b.run(cmdRejudge, "--site", b.site, "--archive", archive, "--dry-run"); code != exitOK {
		t.Errorf("a dry run beside a writer: %s", said)
	}
	if err := a.Close(); err != nil {
		t.Fatal(err)
	}
	for _, bad := range [][]string{{"--from", "yesterday"}, {"--from", "2026-06-02", "--to", "2026-06-01"}, {"--station", "nowhere"}, {"--yes", "--dry-run"}} {
		if code, _, said := b.run(cmdRejudge, append([]string{"--site", b.site, "--archive", archive}, bad...)...); code == exitOK || said == "" {
			t.Errorf("%v: %d %s", bad, code, said)
		}
	}
}

// A part that is judged again ends where nothing that later days look back on differs any more, and the archive is then what judging
// everything by the new rules makes of it.
func TestRejudgeOfAPartStopsInTime(t *testing.T) {
	if testing.Short() {
		t.Skip("judges sixty days")
	}
	b := newYard(t, 60, yardFaults(t)...)
	archive := filepath.Join(b.dir, "archive")
	// Two days have a calibration of their own; later ones keep theirs.
	between := func(sensitivity string) string {
		return strings.Replace(yard("start", "2026-06-06", sensitivity), "sensitivity: "+sensitivity+", unit: uV/(W/m2), uncertainty: 1.2%}]",
			"to: 2026-06-08, sensitivity: "+sensitivity+", unit: uV/(W/m2), uncertainty: 1.2%}, {from: 2026-06-08, sensitivity: 8.62, unit: uV/(W/m2), uncertainty: 1.2%}]", 1)
	}
	b.write("site.yaml", between("8.64"))
	b.judge(archive, b.days...)
	b.write("site.yaml", between("8.70"))
	site, err := rules.Load(b.site)
	if err != nil {
		t.Fatal(err)
	}
	a, err := store.OpenForWriting(vfs.OS{}, archive, store.Options{})
	if err != nil {
		t.Fatal(err)
	}
	first, _ := time.Parse(time.DateOnly, "2026-06-06")
	day := first.Unix() / 86400
	judged := 0
	draft, err := beginDraft(a, broker.PartitionOf("yard"), site)
	if err != nil {
		t.Fatal(err)
	}
	plan, err := engine.NewPlan(&site.Stations[0])
	if err != nil {
		t.Fatal(err)
	}
	p := &pass{archive: a, station: &site.Stations[0], plan: plan, from: day, to: day + 1, helpers: 2, step: func(done, _ int) { judged = done }}
	p.out = newMonths(a, draft, "yard")
	if err := p.run(); err != nil {
		t.Fatal(err)
	}
	if err := p.out.stop(); err != nil {
		t.Fatal(err)
	}
	if _, err := draft.Finish(); err != nil {
		t.Fatal(err)
	}
	if err := a.Close(); err != nil {
		t.Fatal(err)
	}
	if judged >= 60 || p.out.diff.Days == 0 {
		t.Errorf("%d of 60 days judged, %d changed", judged, p.out.diff.Days)
	}
	got, episodes := b.digests(archive)
	anew := filepath.Join(b.dir, "anew")
	b.judge(anew, b.days...)
	want, wantEpisodes := b.digests(anew)
	for d := range want {
		if got[d] != want[d] {
			t.Errorf("day %d: %s, judged anew %s", d, got[d], want[d])
		}
	}
	if episodes != wantEpisodes {
		t.Errorf("episodes\n%s\njudged anew\n%s", episodes, wantEpisodes)
	}
	t.Logf("%d of 60 days judged, %d changed", judged, p.out.diff.Days)
}
