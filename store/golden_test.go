package store

import (
	"flag"
	"fmt"
	"os"
	"strings"
	"testing"
	"time"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/synth"
	"fluxwarden/rules"
	"fluxwarden/store/vfs"
)

var updateGolden = flag.Bool("update", false, "write the golden digests of the archive anew")

const goldenArchive = "../testdata/golden/week.txt"

// TestGoldenArchive judges an invented week with faults in it, from its readings to the products, and holds every digest and every episode against
// the file: they are the same on every CPU and with every compiler, which CI looks at under GOAMD64=v3 and on an emulated arm64.
func TestGoldenArchive(t *testing.T) {
	got := goldenWeek(t)
	if *updateGolden {
		if err := os.WriteFile(goldenArchive, []byte(got), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(goldenArchive)
	if err != nil {
		t.Fatal(err)
	}
	if got == string(want) {
		return
	}
	t.Error("the archive of the golden week has changed: if that is meant, and judge_version has been raised (for a product product.Version), run go test ./store -run TestGoldenArchive -update")
	lines := strings.Split(string(want), "\n")
	for i, line := range strings.Split(got, "\n") {
		if i >= len(lines) || lines[i] != line {
			t.Logf("now: %s", line)
		}
	}
}

func goldenWeek(t *testing.T) string {
	t.Helper()
	check := func(err error) {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
	}
	site, err := rules.Load("../testdata/site/northmoor.yaml")
	check(err)
	station := &site.Stations[0]
	plan, err := engine.NewPlan(station)
	check(err)
	at := func(text string) minute.Stamp {
		x, err := time.Parse(time.RFC3339, text)
		check(err)
		return minute.Stamp(x.UnixMicro())
	}
	made := synth.New(station, 7, synth.ClimateFor(station))
	for _, f := range []synth.Fault{
		{Kind: rules.SignalLost, Instrument: "L1", From: at("2026-06-22T20:00:00Z"), To: at("2026-06-22T22:00:00Z")},
		{Kind: rules.PointingLost, Instrument: "tracker", From: at("2026-06-24T08:00:00Z"), To: at("2026-06-24T15:00:00Z")},
		{Kind: rules.Noise, Instrument: "D1", From: at("2026-06-25T10:00:00Z"), To: at("2026-06-25T14:00:00Z")},
		{Kind: rules.DataGap, Instrument: "logger", From: at("2026-06-27T03:00:00Z"), To: at("2026-06-27T05:00:00Z")},
	} {
		check(made.AddFault(f))
	}
	readings := &minute.Batch{Station: station.ID}
	first := at("2026-06-22T00:00:00Z")
	for s := first; s <= first+7*minute.MicrosPerDay; s += made.Interval() {
		if r := made.Reading(s); len(r.Values) > 0 {
			readings.Append(&r)
		}
	}
	judger, gatherer := engine.NewJudger(plan, nil), minute.NewGatherer(plan.Layout())
	var days []*engine.Judged
	var episodes []fault.Episode
	for day := first.Day(); day < first.Day()+7; day++ {
		block := minute.NewBlock(day, len(plan.Layout().Channels))
		gatherer.Fill(block, readings, 0, minute.PerDay)
		j := judger.Begin(day)
		judger.Advance(block)
		days = append(days, j)
		episodes = append(episodes, judger.End().Closed...)
	}
	episodes = append(episodes, judger.Episodes()...)
	month := NewMonth(station.ID, "2026-06")
	for _, j := range days {
		engine.Settle(plan, j, episodes)
		check(month.Add(j))
	}
	a, err := OpenForWriting(vfs.NewMem(), "/archive", Options{})
	check(err)
	_, err = a.Commit(&Commit{Months: []*Month{month}, Faults: []StationFaults{{station.ID, episodes}}, Site: site, RulesDigest: site.Digest})
	check(err)
	text := fmt.Sprintf("judge_version %d\n", engine.JudgeVersion)
	for _, j := range days {
		rows, err := a.RowDigest(station.ID, j.Day)
		check(err)
		text += fmt.Sprintf("%s minutes %s\n", dayName(j.Day), rows)
		for _, name := range []string{TableCleanMinute, TableCleanHour} {
			digest, err := a.ProductDigest(station.ID, name, dayName(j.Day))
			check(err)
			text += fmt.Sprintf("%s %s %s\n", dayName(j.Day), name, digest)
		}
	}
	digest, err := a.ProductDigest(station.ID, TableCleanDay, "2026-06")
	check(err)
	text += fmt.Sprintf("2026-06 %s %s\n", TableCleanDay, digest)
	kept, err := a.Faults(station.ID)
	check(err)
	if len(kept) < 3 {
		t.Errorf("%d episodes: the week is to have some", len(kept))
	}
	for _, e := range kept {
		text += fmt.Sprintf("%s %s %s, minutes %d to %d, confidence %v\n", e.Instrument, e.Kind, e.Severity, e.From, e.To, e.Confidence)
	}
	return text
}
