package metrics

import (
	"fmt"
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
