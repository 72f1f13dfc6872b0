package engine

import (
	"compress/gzip"
	"encoding/csv"
	"fmt"
	"io"
	"math"
	"os"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/sensor"
	"fluxwarden/rules"
)

// measured opens a file of the measured data that stand beside the project, or skips.
func measured(t *testing.T, name string) io.Reader {
	t.Helper()
	f, err := os.Open("../../../shared/data/" + name)
	if err != nil {
		t.Skip("the measured data are not on this machine: ", err)
	}
	t.Cleanup(func() { _ = f.Close() })
	z, err := gzip.NewReader(f)
	if err != nil {
		t.Fatal(err)
	}
	return z
}

// readTable reads a CSV whose first column is a time.
func readTable(t *testing.T, name, layout string) (at []minute.Stamp, columns map[string][]float64) {
	t.Helper()
	rows, err := csv.NewReader(measured(t, name)).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	columns = map[string][]float64{}
	for _, row := range rows[1:] {
		when, err := time.Parse(layout, row[0])
		if err != nil {
			t.Fatal(err)
		}
		at = append(at, minute.Stamp(when.UnixMicro()))
		for k := 1; k < len(row); k++ {
			v := math.NaN()
			if row[k] != "" {
				if v, err = strconv.ParseFloat(row[k], 64); err != nil {
					t.Fatal(err)
				}
			}
			columns[rows[0][k]] = append(columns[rows[0][k]], v)
		}
	}
	return at, columns
}

// batchOf makes a batch of columns, each under the channel's name.
func batchOf(at []minute.Stamp, columns map[string][]float64) *minute.Batch {
	b := &minute.Batch{At: at}
	for name, c := range columns {
		b.Channels = append(b.Channels, minute.Channel{Name: name, Mean: c})
	}
	return b
}

// TestPyrgeometerDays rebuilds the longwave of two measured days from thermopile voltage, case and dome temperature by the engine's own
// path, from kelvin, from the ohms of a 10 k thermistor and from those of a Pt100. Source: US Department of Energy observatory,
// Southern Great Plains, minute means with the station's coefficients; a standard deviation of 0.06 W/m2 downwards (0.1 upwards) on the
// first day, 0.3 W/m2 on the second, whose body temperatures change quickly.
func TestPyrgeometerDays(t *testing.T) {
	for _, c := range []struct {
		date        string
		k1, k2, k3  float64 // net = k1 U, W/m2 per uV
		sd          float64
		flux, net   string
		caseK, dome string
	}{
		{"2019-01-01", 0.24775, 1.0079, 2.30, 0.06, "lw_down", "lw_down_net", "lw_down_case_k", "lw_down_dome_k"},
		{"2019-01-01", 0.25537, 1.0079, 2.77, 0.1, "lw_up", "lw_up_net", "lw_up_case_k", "lw_up_dome_k"},
		{"2019-07-05", 0.25065, 1.0034, 3.50, 0.3, "lw_down", "lw_down_net", "lw_down_case_k", "lw_down_dome_k"},
	} {
		for _, unit := range []string{"K", "ohm_10k", "ohm_curve", "ohm_pt100"} {
			curve := ""
			if unit == "ohm_curve" { // that of ohm_10k, given by its coefficients
				curve = ", thermistor: [1.0295e-3, 2.391e-4, 1.568e-7]"
			}
			t.Run(fmt.Sprintf("%s %s %s", c.date, c.flux, unit), func(t *testing.T) {
				at, columns := readTable(t, "pyrgeometer/plains_"+c.date+".csv.gz", time.RFC3339)
				text := fmt.Sprintf(networkText+`
  - id: plains
    name: Plains
    latitude: 36.605
    longitude: -97.485
    elevation: 318
    time: {label: start, interval: 60s}
    instruments:
      - {id: L1, measures: %s, input: {signal: u, unit: uV, case: case, case_unit: %s, dome: dome, dome_unit: %s%s}, calibrations: [{from: 2019-01-01, sensitivity: %.9f, unit: uV/(W/m2), k1: 0, k2: %v, k3: %v}]}
`, c.flux, unit, unit, curve, 1/c.k1, c.k2, c.k3)
				p := planOf(t, text)
				in := map[string][]float64{"u": nil, "case": nil, "dome": nil}
				for r := range at {
					in["u"] = append(in["u"], columns[c.net][r]/c.k1)
					in["case"] = append(in["case"], asSent(columns[c.caseK][r], unit))
					in["dome"] = append(in["dome"], asSent(columns[c.dome][r], unit))
				}
				day := dayOf(t, c.date)
				judger := NewJudger(p, nil)
				j := judger.Begin(day)
				judger.Advance(blockOf(p, batchOf(at, in), day))
				judger.End()
				Settle(p, j, nil)
				n, sum, squares := 0.0, 0.0, 0.0
				s := &j.Series[0]
				for r := range at {
					want := columns[c.flux][r]
					if d := s.Measured[at[r].Minute()-day*minute.PerDay] - want; d == d {
						n, sum, squares = n+1, sum+d, squares+d*d
					}
				}
				sd := math.Sqrt((squares - sum*sum/n) / (n - 1))
				t.Logf("%.0f minutes, standard deviation %.4f W/m2, mean %.4f W/m2", n, sd, sum/n)
				if n < 1400 || !(sd <= c.sd) || !(math.Abs(sum/n) < 0.3) {
					t.Errorf("%.0f minutes, standard deviation %.4f W/m2, mean %.4f W/m2, allowed %v and 0.3", n, sd, sum/n, c.sd)
				}
			})
		}
	}
}

// asSent is a temperature as a logger sends it in the unit.
func asSent(kelvin float64, unit string) float64 {
	switch unit {
	case "ohm_10k", "ohm_curve":
		return sensor.Thermistor10k.ResistanceOhm(kelvin)
	case "ohm_pt100":
		return sensor.PlatinumOhm(kelvin-273.15, 100)
	}
	return kelvin
}

// A networkDay is one daily file of the US network: channels as its columns are named, and the flag of each value.
type networkDay struct {
	name            string
	lat, lon, elevM float64
	kelvin          bool
	at              []minute.Stamp
	zenith          []float64
	values          map[string][]float64
	flags           map[string][]int
}

var networkColumns = strings.Fields("dw_solar uw_solar direct_n diffuse dw_ir dw_case dw_dome uw_ir uw_case uw_dome uvb par netsolar netir totalnet temp rh windspd winddir pressure")

func readNetworkDay(t *testing.T, file string) *networkDay {
	t.Helper()
	text, err := io.ReadAll(measured(t, "us_network/"+file+".dat.gz"))
	if err != nil {
		t.Fatal(err)
	}
	d := &networkDay{values: map[string][]float64{}, flags: map[string][]int{}, kelvin: true}
	for i, line := range strings.Split(string(text), "\n") {
		f := strings.Fields(line)
		number := func(k int) float64 {
			v, err := strconv.ParseFloat(f[k], 64)
			if err != nil {
				t.Fatal(err)
			}
			return v
		}
		switch {
		case i == 0:
			d.name = strings.TrimSpace(line)
		case i == 1:
			d.lat, d.lon, d.elevM = number(0), number(1), number(2)
			if d.lon > 0 { // this file prints its west longitude as positive, and its body temperatures in degrees C
				d.lon, d.kelvin = -d.lon, false
			}
		case len(f) == 8+2*len(networkColumns):
			when := time.Date(int(number(0)), time.Month(int(number(2))), int(number(3)), int(number(4)), int(number(5)), 0, 0, time.UTC)
			d.at = append(d.at, minute.Stamp(when.UnixMicro()))
			d.zenith = append(d.zenith, number(7))
			for k, c := range networkColumns {
				d.values[c] = append(d.values[c], number(8+2*k))
				d.flags[c] = append(d.flags[c], int(number(9+2*k)))
			}
		}
	}
	return d
}

func (d *networkDay) plan(t *testing.T) *Plan {
	unit := "degC"
	if d.kelvin {
		unit = "K"
	}
	return planOf(t, fmt.Sprintf(networkText+`
  - id: network
    name: %s
    latitude: %v
    longitude: %v
    elevation: %v
    time: {label: end, interval: 60s}
    instruments:
      - {id: G1, measures: global, class: B, input: {irradiance: dw_solar}}
      - {id: B1, measures: direct, class: A, input: {irradiance: direct_n}}
      - {id: D1, measures: diffuse, class: A, input: {irradiance: diffuse}}
      - {id: U1, measures: reflected, class: B, input: {irradiance: uw_solar}}
      - {id: L1, measures: lw_down, input: {irradiance: dw_ir, case: dw_case, case_unit: %[5]s, dome: dw_dome, dome_unit: %[5]s}}
      - {id: L2, measures: lw_up, input: {irradiance: uw_ir, case: uw_case, case_unit: %[5]s, dome: uw_dome, dome_unit: %[5]s}}
    weather: {air_temperature: temp, humidity: rh, pressure: pressure, wind_speed: windspd}
`, d.name, d.lat, d.lon, d.elevM, unit))
}

// TestNetworkDays judges three station-days of the US national surface radiation network (daily files, 1 min, quality flag with each value,
// 0 is good) and prints what the network flags against what the tests here come to. Their zenith angle is of the minute's middle and, while
// the sun is up, refracted as at sea level: it is met within 0.1 degrees but between 88 and 91, where formulas of refraction part. What they
// flag and cannot be is not accepted here.
func TestNetworkDays(t *testing.T) {
	channels := map[rules.Quantity]string{rules.Global: "dw_solar", rules.Direct: "direct_n", rules.Diffuse: "diffuse", rules.Reflected: "uw_solar",
		rules.LWDown: "dw_ir", rules.LWUp: "uw_ir", rules.AirTemperature: "temp", rules.Humidity: "rh", rules.Pressure: "pressure", rules.WindSpeed: "windspd"}
	for _, file := range []string{"dra24048", "slv16001", "tbl17005"} {
		t.Run(file, func(t *testing.T) {
			d := readNetworkDay(t, file)
			p := d.plan(t)
			b := batchOf(d.at, d.values)
			worst, worstAtHorizon := 0.0, 0.0
			for q := range rules.Quantity(rules.QuantityCount) {
				c, ok := channels[q]
				if !ok {
					continue
				}
				var good, bad [rules.VerdictCount]int
				tests := map[string]int{}
				for _, day := range minute.NewGatherer(p.layout).Days(b) {
					judger := NewJudger(p, nil)
					j := judger.Begin(day)
					judger.Advance(blockOf(p, b, day))
					judger.End()
					Settle(p, j, nil)
					for k, at := range d.at {
						r := int(p.layout.Minute(at) - day*minute.PerDay)
						if r < 0 || r >= minute.PerDay {
							continue
						}
						zenith := j.ZenithDeg[r]
						if d.zenith[k] < 90 {
							zenith = j.ApparentZenithDeg[r]
						}
						if d.zenith[k] > 88 && d.zenith[k] < 91 {
							worstAtHorizon = math.Max(worstAtHorizon, math.Abs(zenith-d.zenith[k]))
						} else {
							worst = math.Max(worst, math.Abs(zenith-d.zenith[k]))
						}
						s := j.Primary(q)
						v, verdict := d.values[c][k], s.Verdict[r]
						if d.flags[c][k] == 0 {
							good[verdict]++
							if verdict != rules.Accepted {
								tests[s.Missed[r].Join("+")]++
							}
							continue
						}
						bad[verdict]++
						if absurd(q, v, j.ExtraterrestrialWm2[r]) && verdict == rules.Accepted {
							t.Errorf("%s: %v at row %d is flagged there, cannot be, and is accepted here", q, v, r)
						}
					}
				}
				all := good[rules.Accepted] + good[rules.Questioned] + good[rules.Rejected] + good[rules.Absent]
				t.Logf("%-15s good there %4d: accepted %4d questioned %4d rejected %4d absent %4d   flagged there %4d: accepted %4d questioned %4d rejected %4d absent %4d   %v",
					q, all, good[rules.Accepted], good[rules.Questioned], good[rules.Rejected], good[rules.Absent],
					bad[rules.Accepted]+bad[rules.Questioned]+bad[rules.Rejected]+bad[rules.Absent], bad[rules.Accepted], bad[rules.Questioned], bad[rules.Rejected], bad[rules.Absent], tests)
				if float64(good[rules.Rejected]+good[rules.Absent]) > 0.01*float64(all) || float64(good[rules.Accepted]) < 0.9*float64(all) {
					t.Errorf("%s: of %d values that are good there %d are accepted here and %d rejected or absent", q, all, good[rules.Accepted], good[rules.Rejected]+good[rules.Absent])
				}
			}
			t.Logf("zenith angle: largest difference %.3f degrees, %.3f at the horizon", worst, worstAtHorizon)
			if worst > 0.1 || worstAtHorizon > 1 {
				t.Errorf("zenith angle: largest difference %.3f degrees, allowed 0.1", worst)
			}
		})
	}
}

// absurd says whether a value cannot be, by bounds of its own and not by the tests'.
func absurd(q rules.Quantity, v, extraterrestrialWm2 float64) bool {
	switch {
	case v <= -9999:
		return true
	case q == rules.Direct:
		return v < -50 || v > extraterrestrialWm2
	case q.Shortwave():
		return v < -50 || v > 1.6*extraterrestrialWm2
	case q.Longwave():
		return v < 30 || v > 900
	case q == rules.Humidity:
		return v < -1 || v > 110
	}
	return false
}

const lyngbyText = networkText + `
  - id: lyngby
    name: Lyngby
    latitude: 55.79064
    longitude: 12.52505
    elevation: 50
    time: {label: start, interval: 60s}
    instruments:
      - {id: G1, measures: global, class: A, input: {irradiance: GHI}}
      - {id: B1, measures: direct, class: A, input: {irradiance: DNI}}
      - {id: D1, measures: diffuse, class: A, input: {irradiance: DHI}}
      - {id: L1, measures: lw_down, input: {irradiance: LWD}}
    weather: {air_temperature: air_temperature, pressure: air_pressure, humidity: relative_humidity}
`

// TestLyngbySoundDays: on sound days of the radiation station of the Technical University of Denmark at least 99 % of the sunlit values are
// accepted, in every month. The figures are of the tests alone; those with the episodes of the diagnosis are printed beside them.
func TestLyngbySoundDays(t *testing.T) {
	p := planOf(t, lyngbyText)
	var alone, whole share
	for _, month := range strings.Fields("2016_03 2016_05 2016_06 2016_09 2016_10 2024_06 2024_08 2024_10 2024_12 2025_02") {
		t.Run(month, func(t *testing.T) {
			at, columns := readTable(t, "lyngby/"+month+".csv.gz", time.DateTime)
			b := batchOf(at, columns)
			days := minute.NewGatherer(p.layout).Days(b)
			sound := soundDays(p, at, columns)
			if len(sound) == 0 {
				t.Log("no fourteen days of this month are sound")
				return
			}
			judger := NewJudger(p, nil)
			var kept []*Judged
			var episodes []fault.Episode
			judgeDays(p, judger, b, days[0], len(days), func(j *Judged, s DaySummary, _ []fault.Episode) {
				kept = append(kept, j)
				episodes = append(episodes, s.Closed...)
			})
			for _, e := range judger.Episodes() {
				if e.To == fault.Open {
					episodes = append(episodes, e)
				}
			}
			a, tests := sunlitAccepted(p, kept, sound, nil)
			w, _ := sunlitAccepted(p, kept, sound, episodes)
			alone, whole = alone.and(a), whole.and(w)
			for _, e := range episodes {
				t.Logf("episode on measured data: %s %s (%s) from %s", e.Instrument, e.Kind, e.Severity, time.Unix(60*e.From, 0).UTC().Format(time.DateTime))
			}
			t.Logf("%d sound days: %.3f %% of the sunlit values accepted by the tests alone, %.3f %% with the diagnosis; not accepted for %v", len(sound), a.percent(), w.percent(), tests)
			if a.percent() < 99 {
				t.Errorf("%.3f %% of the sunlit values accepted by the tests alone, want 99", a.percent())
			}
		})
	}
	t.Logf("all months: %.3f %% of %d sunlit values accepted by the tests alone, %.3f %% with the diagnosis", alone.percent(), alone.of, whole.percent())
}

// A share is so many of so many.
type share struct{ part, of int }

func (s share) and(o share) share { return share{s.part + o.part, s.of + o.of} }

func (s share) percent() float64 { return 100 * float64(s.part) / float64(s.of) }

func sunlitAccepted(p *Plan, days []*Judged, sound map[int64]bool, episodes []fault.Episode) (accepted share, tests map[string]int) {
	tests = map[string]int{}
	for _, j := range days {
		if !sound[j.Day] {
			continue
		}
		Settle(p, j, episodes)
		for i := range j.Series {
			s := &j.Series[i]
			if int(s.Quantity) >= rules.RadiationCount {
				continue
			}
			for r := range j.Rows {
				if j.ApparentZenithDeg[r] >= 90 || s.Verdict[r] == rules.Absent {
					continue
				}
				accepted.of++
				if s.Verdict[r] == rules.Accepted {
					accepted.part++
				} else {
					tests[s.Quantity.String()+" "+s.Missed[r].Join("+")]++
				}
			}
		}
	}
	return accepted, tests
}

// soundDays are the days in any fourteen days on end that are sound. The criterion is that of the fault bench that judges the diagnosis
// from outside (base.go, func sound, without longwave), on the geometry here: under one minute in a hundred missing, closure near its own
// median, no day with fifty minutes beyond 8 % of it, no night with a shifted zero.
func soundDays(p *Plan, at []minute.Stamp, columns map[string][]float64) map[int64]bool {
	const windowDays = 14
	out := map[int64]bool{}
	ghi, dni, dhi := columns["GHI"], columns["DNI"], columns["DHI"]
	mus := make([]float64, len(at))
	var j *Judged
	for k := range at {
		if j == nil || j.Day != at[k].Day() {
			j = p.NewJudged(at[k].Day())
		}
		mus[k] = math.Cos(j.ZenithDeg[at[k].Minute()-j.Day*minute.PerDay] * math.Pi / 180)
	}
	for start := 0; start+windowDays*minute.PerDay <= len(at); start += minute.PerDay {
		end := start + windowDays*minute.PerDay
		if soundWindow(ghi[start:end], dni[start:end], dhi[start:end], mus[start:end]) {
			for k := start; k < end; k++ {
				out[at[k].Day()] = true
			}
		}
	}
	return out
}

func soundWindow(ghi, dni, dhi, mu []float64) bool {
	closure := func(k int) float64 {
		if sum := dni[k]*math.Max(mu[k], 0) + dhi[k]; mu[k] > 0.26 && sum > 50 {
			return ghi[k] / sum
		}
		return math.NaN()
	}
	missing, sunny := 0, 0
	var ratios []float64
	for k := range ghi {
		if math.IsNaN(ghi[k]) || math.IsNaN(dni[k]) || math.IsNaN(dhi[k]) {
			missing++
			continue
		}
		if r := closure(k); !math.IsNaN(r) {
			ratios = append(ratios, r)
		}
		if mu[k] > 0.2 && dni[k] > 300 {
			sunny++
		}
	}
	if float64(missing) >= 0.01*float64(len(ghi)) || len(ratios) < 500 || sunny <= 60*len(ghi)/1440 {
		return false
	}
	mid, off := medianOf(ratios), 0
	for day := 0; day+1440 <= len(ghi); day += 1440 {
		today := 0
		var night []float64
		for k := day; k < day+1440; k++ {
			if r := closure(k); math.Abs(r/mid-1) > 0.08 {
				today++
			}
			if mu[k] < -0.17 && !math.IsNaN(ghi[k]) {
				night = append(night, ghi[k])
			}
		}
		if off += today; today >= 50 {
			return false
		}
		if z := medianOf(night); z < -7 || z > 4 {
			return false
		}
	}
	return float64(off) < 0.02*float64(len(ratios))
}

func medianOf(x []float64) float64 {
	if len(x) == 0 {
		return math.NaN()
	}
	y := slices.Sorted(slices.Values(x))
	return y[len(y)/2]
}
