package metrics

import (
	"fmt"
	"strings"
	"testing"
	"time"

	"github.com/prometheus/client_golang/prometheus/testutil"

	"fluxwarden/qc/fault"
	"fluxwarden/rules"
)

func seriesOf(t *testing.T, m *Metrics) int {
	t.Helper()
	families, err := m.Registry.Gather()
	if err != nil {
		t.Fatal(err)
	}
	n := 0
	for _, f := range families {
		for _, x := range f.Metric {
			if h := x.Histogram; h != nil {
				n += len(h.Bucket) + 3
			} else {
				n++
			}
		}
	}
	return n
}

// Two thousand stations with many faults each must stay under ten thousand series.
func TestSeriesAreBounded(t *testing.T) {
	now := time.Unix(1_800_000_000, 0)
	m := New("test", func() time.Time { return now })
	var ids []string
	for i := range 2000 {
		ids = append(ids, fmt.Sprintf("station-%04d", i))
	}
	m.Stations(ids)
	for _, id := range ids {
		m.Worker().LastMinute(id, now)
		var all []fault.Episode
		for k := range rules.FaultKind(5) {
			all = append(all, fault.Episode{Station: id, Instrument: "G1", Kind: k, To: fault.Open})
		}
		m.Episodes(id, all)
		m.Worker().Failed("commit")
	}
	m.Maintenance(ids)
	site := &rules.Site{}
	for _, id := range ids {
		in := rules.Instrument{ID: "G1", Calibrations: []rules.Calibration{{From: now.AddDate(-2, 0, 0)}}}
		site.Stations = append(site.Stations, rules.Station{ID: id, Instruments: []rules.Instrument{in, in, in}})
		for k := range site.Stations[len(site.Stations)-1].Instruments {
			site.Stations[len(site.Stations)-1].Instruments[k].ID = fmt.Sprintf("G%d", k)
		}
	}
	m.Calibrations(site)
	n := seriesOf(t, m)
	t.Logf("%d series", n)
	if n >= 10_000 {
		t.Errorf("%d series with 2000 stations; want fewer than 10000", n)
	}
}

// The series of a fault is there while the episode is open, and no longer.
func TestFaultSeriesEndWithTheFault(t *testing.T) {
	m := New("test", time.Now)
	m.Stations([]string{"northmoor"})
	e := fault.Episode{Instrument: "G1", Kind: rules.SignalLost, To: fault.Open}
	m.Episodes("northmoor", []fault.Episode{e})
	if n, err := testutil.GatherAndCount(m.Registry, "fluxwarden_fault_open"); n != 1 || err != nil {
		t.Errorf("%d series of an open fault, %v", n, err)
	}
	e.To = 7
	m.Episodes("northmoor", []fault.Episode{e})
	if n, err := testutil.GatherAndCount(m.Registry, "fluxwarden_fault_open"); n != 0 || err != nil {
		t.Errorf("%d series of a fault that has ended, %v", n, err)
	}
}

// Names follow the conventions of the ecosystem.
func TestNamesFollowConventions(t *testing.T) {
	m := New("test", time.Now)
	problems, err := testutil.GatherAndLint(m.Registry)
	if err != nil {
		t.Fatal(err)
	}
	for _, p := range problems {
		t.Errorf("%s: %s", p.Metric, p.Text)
	}
}

// A calibration has a series from two months before its end on; one without an end in the site file holds two years.
func TestCalibrationsThatEnd(t *testing.T) {
	now := time.Date(2026, 6, 21, 12, 0, 0, 0, time.UTC)
	m := New("test", func() time.Time { return now })
	m.Stations([]string{"northmoor"})
	m.Calibrations(&rules.Site{Stations: []rules.Station{{ID: "northmoor", Instruments: []rules.Instrument{
		{ID: "fresh", Calibrations: []rules.Calibration{{From: now.AddDate(-1, 0, 0)}}},
		{ID: "old", Calibrations: []rules.Calibration{{From: now.AddDate(-3, 0, 0)}}},
		{ID: "renewed", Calibrations: []rules.Calibration{{From: now.AddDate(-3, 0, 0), To: now.AddDate(-1, 0, 0)}, {From: now.AddDate(-1, 0, 0)}}},
		{ID: "ending", Calibrations: []rules.Calibration{{From: now.AddDate(-1, 0, 0), To: now.AddDate(0, 1, 0)}}},
		{ID: "none"},
	}}}})
	want := fmt.Sprintf(`# HELP fluxwarden_calibration_due_timestamp_seconds When an instrument's calibration ends; only of those that end within two months or have ended.
# TYPE fluxwarden_calibration_due_timestamp_seconds gauge
fluxwarden_calibration_due_timestamp_seconds{instrument="old",station="northmoor"} %d
fluxwarden_calibration_due_timestamp_seconds{instrument="ending",station="northmoor"} %d
`, now.AddDate(-3, 0, 0).Add(calibrationHolds).Unix(), now.AddDate(0, 1, 0).Unix())
	if err := testutil.GatherAndCompare(m.Registry, strings.NewReader(want), "fluxwarden_calibration_due_timestamp_seconds"); err != nil {
		t.Error(err)
	}
}

// A station that is declared and was never heard has a series all the same: otherwise its silence could not be seen.
func TestASilentStationHasASeries(t *testing.T) {
	m := New("test", time.Now)
	m.Stations([]string{"northmoor"})
	m.Maintenance([]string{"northmoor", "elsewhere"})
	for name, want := range map[string]int{"fluxwarden_station_last_minute_timestamp_seconds": 1, "fluxwarden_station_maintenance": 1, "fluxwarden_station_lag_seconds": 0} {
		if n, err := testutil.GatherAndCount(m.Registry, name); n != want || err != nil {
			t.Errorf("%s: %d series, %v; want %d", name, n, err, want)
		}
	}
}
