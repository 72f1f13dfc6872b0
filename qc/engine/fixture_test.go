package engine

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"fmt"
	"math"
	"testing"
	"time"

	"fluxwarden/qc/exact"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/sun"
	"fluxwarden/rules"
)

// The stations of these tests are invented.

const networkText = "network: {id: test, name: Test}\nstations:\n"

// meadowText has one instrument of every kind, in every unit, and a logger that labels by the end.
const meadowText = networkText + `
  - id: meadow
    name: Meadow
    latitude: 46.8
    longitude: 9.1
    elevation: 480
    time: {label: end, interval: 60s}
    horizon: [[0, 1], [110, 6], [180, 2], [260, 7]]
    instruments:
      - {id: G1, measures: global, class: A, primary: true, input: {signal: g1_mv, unit: mV, range: [-5, 25]}, calibrations: [{from: 2020-01-01, sensitivity: 8.4, unit: uV/(W/m2)}]}
      - {id: G2, measures: global, class: B, input: {signal: g2_uv, unit: uV}, calibrations: [{from: 2020-01-01, sensitivity: 11.2, unit: uV/(W/m2)}]}
      - {id: B1, measures: direct, class: A, input: {signal: b1_v, unit: V}, calibrations: [{from: 2020-01-01, sensitivity: 7.9, unit: uV/(W/m2)}]}
      - {id: D1, measures: diffuse, class: A, input: {signal: d1_mv, unit: mV}, calibrations: [{from: 2020-01-01, sensitivity: 9.1, unit: uV/(W/m2)}]}
      - {id: U1, measures: reflected, class: B, input: {irradiance: rsw}}
      - {id: L1, measures: lw_down, input: {signal: l1_mv, unit: mV, case: l1_case_c, dome: l1_dome_c}, calibrations: [{from: 2020-01-01, sensitivity: 4.1, unit: uV/(W/m2), k1: 0.05, k2: 0.998, k3: 2.9}]}
      - {id: L2, measures: lw_up, input: {signal: l2_mv, unit: mV, case: l2_case_k, case_unit: K}, calibrations: [{from: 2020-01-01, sensitivity: 4.4, unit: uV/(W/m2)}]}
    weather: {air_temperature: ta_c, humidity: rh_pct, pressure: p_hpa}
`

// fieldText has the three irradiances and three weather channels that the core's speed is stated for.
const fieldText = networkText + `
  - id: field
    name: Field
    latitude: 46.8
    longitude: 9.1
    elevation: 480
    time: {label: start, interval: 60s}
    instruments:
      - {id: G1, measures: global, class: A, input: {signal: g1_mv, unit: mV}, calibrations: [{from: 2020-01-01, sensitivity: 8.4, unit: uV/(W/m2)}]}
      - {id: B1, measures: direct, class: A, input: {signal: b1_mv, unit: mV}, calibrations: [{from: 2020-01-01, sensitivity: 7.9, unit: uV/(W/m2)}]}
      - {id: D1, measures: diffuse, class: A, input: {signal: d1_mv, unit: mV}, calibrations: [{from: 2020-01-01, sensitivity: 9.1, unit: uV/(W/m2)}]}
    weather: {air_temperature: ta_c, humidity: rh_pct, pressure: p_hpa}
`

func planOf(t testing.TB, text string) *Plan {
	t.Helper()
	site, err := rules.Parse("test.yaml", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	p, err := NewPlan(&site.Stations[0])
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func dayOf(t testing.TB, date string) int64 {
	t.Helper()
	at, err := time.Parse(time.DateOnly, date)
	if err != nil {
		t.Fatal(err)
	}
	return minute.FloorDiv(at.Unix(), 86400)
}

// A dice is a linear congruential generator: the same numbers on every machine and in every release of Go.
type dice uint64

func (d *dice) share() float64 {
	*d = *d*6364136223846793005 + 1442695040888963407
	return float64(*d>>11) / (1 << 53)
}

// about gives a number about nothing with a standard deviation of one.
func (d *dice) about() float64 {
	return (d.share() + d.share() + d.share() + d.share() - 2) * math.Sqrt(3)
}

func resolved(v, steps float64) float64 { return math.RoundToEven(v*steps) / steps }

// inventedDays makes readings of a station with invented weather: cloud that comes and goes, noise, and what goes wrong at stations. They
// have the logger's resolution, so that they do not hang on a last bit.
func inventedDays(p *Plan, first int64, days int, seed uint64, spoil bool) *minute.Batch {
	d := dice(seed*2 + 1)
	b := &minute.Batch{Station: p.Station.ID}
	cloud, until := 0.0, 0
	for day := range days {
		at := sun.NewDay(first+int64(day), p.site)
		for m := range minute.PerDay {
			if until--; until < 0 {
				cloud, until = math.Max(0, d.share()*1.8-0.8), 5+int(d.share()*50)
			}
			mu := math.Max(0, at.AtMinute(float64(60*m+30)).CosZenith)
			clear := 1080 * exact.Pow(mu, 1.2)
			beam := 950 * exact.Pow(mu, 0.4) * math.Max(0, 1-1.7*cloud+0.02*d.about())
			if mu == 0 {
				beam = 0
			}
			diffuse := clear * (0.12 + 0.35*cloud)
			global := beam*mu + diffuse
			airC := 8 + 9*mu + 0.2*d.about()
			net := -70*(1-cloud) - 5
			w := inventedMinute{g: global*(1+0.01*d.about()) - 2*(1-cloud), b: beam, d: diffuse*(1+0.01*d.about()) - 2*(1-cloud), u: 0.22 * global,
				net: net + d.about(), netUp: 25*mu - 5, caseC: airC + 0.5, domeC: airC + 0.2, airC: airC, rh: 60 + 25*cloud, hPa: 955 + d.about()}
			minuteOfWeek := day*minute.PerDay + m
			if spoil && w.spoil(minuteOfWeek, &d) {
				continue
			}
			stamp := minute.Stamp((first+int64(day))*minute.PerDay+int64(m)) * minute.MicrosPerMinute
			if p.Station.Time.LabelEnd {
				stamp += minute.MicrosPerMinute
			}
			b.Append(&minute.Reading{At: stamp, Values: w.values(p)})
			if spoil && minuteOfWeek%1999 == 7 { // a stamp comes twice with another value
				w.g += 40
				b.Append(&minute.Reading{At: stamp, Values: w.values(p)})
			}
		}
	}
	return b
}

type inventedMinute struct{ g, b, d, u, net, netUp, caseC, domeC, airC, rh, hPa float64 }

// spoil does to some minutes of a week what happens at stations; true is: the record is lost.
func (w *inventedMinute) spoil(m int, d *dice) bool {
	hour := m / 60
	switch {
	case hour >= 50 && hour < 53, m%977 == 3:
		return true
	case hour >= 60 && hour < 62:
		w.g = math.NaN()
	case hour >= 84 && hour < 86:
		w.d = 123
	case m%733 == 5:
		w.b += 900
	case m%541 == 9:
		w.g *= 2.5
	case hour == 100:
		w.g, w.d = w.g-14, w.d-28
	case hour == 106:
		w.caseC += 35
	case hour == 120:
		w.net += 160
	case hour == 130:
		w.airC = 99
	case hour > 132 && hour < 140:
		w.b *= 0.6
	}
	return false
}

// values are what the station's logger sends for the minute.
func (w *inventedMinute) values(p *Plan) []minute.ChannelValue {
	var out []minute.ChannelValue
	add := func(name string, v float64) {
		if p.column(name) >= 0 && p.column(name) < len(p.layout.Channels) && v == v {
			out = append(out, minute.ChannelValue{Channel: name, Value: minute.Single(v)})
		}
	}
	mark := func(v float64) float64 {
		if math.IsNaN(v) {
			return -7999
		}
		return v
	}
	declared := len(p.layout.Channels)
	add("g1_mv", mark(resolved(w.g*8.4/1000, 1000)))
	add("g2_uv", mark(resolved(w.g*11.2*1.01, 1)))
	add("b1_v", resolved(w.b*7.9/1e6, 1e6))
	add("b1_mv", resolved(w.b*7.9/1000, 1000))
	add("d1_mv", resolved(w.d*9.1/1000, 1000))
	add("rsw", resolved(w.u, 10))
	add("l1_mv", resolved(w.net*4.1/1000, 1000))
	add("l1_case_c", resolved(w.caseC, 100))
	add("l1_dome_c", resolved(w.domeC, 100))
	add("l2_mv", resolved(w.netUp*4.4/1000, 1000))
	add("l2_case_k", resolved(w.caseC+273.15, 100))
	add("ta_c", resolved(w.airC, 10))
	add("rh_pct", resolved(w.rh, 10))
	add("p_hpa", resolved(w.hPa, 10))
	p.layout.Channels = p.layout.Channels[:declared]
	return out
}

// blockOf gathers one day.
func blockOf(p *Plan, b *minute.Batch, day int64) *minute.Block {
	g := minute.NewGatherer(p.layout)
	block := minute.NewBlock(day, len(p.layout.Channels))
	g.Fill(block, b, 0, minute.PerDay)
	return block
}

// canonicalDigest is a digest of the rows in a form of its own, so that it hangs on no file format.
func canonicalDigest(j *Judged) string {
	h := sha256.New()
	var b []byte
	number := func(v, steps float64) {
		if math.IsNaN(v) {
			b = binary.LittleEndian.AppendUint64(b, 1<<63)
			return
		}
		b = binary.LittleEndian.AppendUint64(b, uint64(int64(v*steps)))
	}
	b = fmt.Appendf(b, "%s %d %d\n", j.Station, j.Day, j.Rows)
	for r := range j.Rows {
		b = binary.LittleEndian.AppendUint16(b, j.Records[r])
		number(j.ZenithDeg[r], anglePerDegree)
		number(j.ApparentZenithDeg[r], anglePerDegree)
		number(j.AzimuthDeg[r], anglePerDegree)
		number(j.ExtraterrestrialWm2[r], irradiancePerWm2)
		number(math.RoundToEven(j.CosZenith[r]*1e6), 1)
		for _, c := range [][]float64{j.ClearGlobalWm2, j.ClearDirectWm2, j.ClearDiffuseWm2, j.ClearLWDownWm2} {
			number(c[r], irradiancePerWm2)
		}
	}
	h.Write(b)
	for i := range j.Series {
		s := &j.Series[i]
		b = fmt.Appendf(b[:0], "%s %s %v\n", s.Instrument, s.Quantity, s.Primary)
		for r := range j.Rows {
			for _, v := range [...]float64{s.Measured[r], s.Value[r], s.SD[r], s.Min[r], s.Max[r], s.U95[r]} {
				number(v, irradiancePerWm2)
			}
			b = binary.LittleEndian.AppendUint32(b, s.N[r])
			b = append(b, byte(s.Verdict[r]))
			b = binary.LittleEndian.AppendUint32(b, uint32(s.Missed[r]))
			b = binary.LittleEndian.AppendUint32(b, uint32(s.Passed[r]))
			b = binary.LittleEndian.AppendUint32(b, uint32(s.Faults[r]))
			if s.Restored[r] {
				b = append(b, 1)
			}
			for t := range s.Outcomes {
				if s.Outcomes[t] != nil {
					b = append(b, byte(s.Outcomes[t][r]))
				}
			}
		}
		h.Write(b)
	}
	return hex.EncodeToString(h.Sum(nil))
}

// testsAlone settles with no episode and takes out what the diagnosis has learnt.
func testsAlone(p *Plan, j *Judged) {
	Settle(p, j, nil)
	for _, c := range [][]float64{j.ClearGlobalWm2, j.ClearDirectWm2, j.ClearDiffuseWm2, j.ClearLWDownWm2} {
		fillNaN(c)
	}
}

// judgeDays runs a judger over the days and hands each judged day to see, before it is used again.
func judgeDays(p *Plan, judger *Judger, b *minute.Batch, first int64, days int, see func(*Judged, DaySummary, []fault.Episode)) {
	for day := first; day < first+int64(days); day++ {
		j := judger.Begin(day)
		judger.Advance(blockOf(p, b, day))
		summary := judger.End()
		see(j, summary, append(append([]fault.Episode(nil), summary.Closed...), summary.Open...))
	}
}
