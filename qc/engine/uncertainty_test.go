package engine

import (
	"math"
	"strings"
	"testing"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/uncertainty"
	"fluxwarden/rules"
)

// TestU95OfAMinute is worked by hand: class A (ISO 9060:2018, from memory) at 1000 W/m2 of global and 950 of beam about noon, no certificate (2 %
// assumed, two years old), a logger that converts, net longwave not known. All limits rectangular but the certificate's and the sky's.
func TestU95OfAMinute(t *testing.T) {
	p := planOf(t, plainText)
	const noon = 727
	mu := p.NewJudged(dayOf(t, equinox)).CosZenith[noon]
	sky := 1000 - 950*mu
	j := judgedMinutes(t, p, equinox, map[int]map[string]float64{noon: {"ghi": 1000, "dni": 950, "dhi": RoundIrradiance(sky)}})
	sum := 16.0*16 + 10*10 + 5*5 + 5*5 + 5*5 + 9.5*9.5 + 7*7 + 2*2 + 2*2 // stability, temperature, linearity, spectral, tilt, beam, zero a, b, processing
	sum += 950 * 950 * (1 - mu*mu) * math.Pow(0.2*math.Pi/180, 2)        // levelling
	want := 2 * math.Sqrt(10*10+sum/3+sky*sky*0.02*0.02/6)
	got := j.Primary(rules.Global).U95[noon]
	if !(math.Abs(got-want) <= 0.5/spreadPerUnit) {
		t.Errorf("U95 %v W/m2, want %v rounded to 1/32", got, want)
	}
}

// TestU95IsThere: every value has one, in steps of 1/32, and what is not there has none.
func TestU95IsThere(t *testing.T) {
	for _, text := range []string{meadowText, calibratedText} {
		p := planOf(t, text)
		first := dayOf(t, equinox)
		b := inventedDays(p, first, 2, 4, true)
		judgeDays(p, NewJudger(p, nil), b, first, 2, func(j *Judged, _ DaySummary, episodes []fault.Episode) {
			Settle(p, j, episodes)
			for i := range j.Series {
				s := &j.Series[i]
				for r := range j.Rows {
					u := s.U95[r]
					switch there := s.Measured[r] == s.Measured[r] && int(s.Quantity) < rules.RadiationCount; {
					case there != (u == u):
						t.Fatalf("%s row %d: measured %v, U95 %v", s.Instrument, r, s.Measured[r], u)
					case there && !(u > 0 && u < 1e6 && u*spreadPerUnit == math.Floor(u*spreadPerUnit)):
						t.Fatalf("%s row %d: U95 %v", s.Instrument, r, u)
					}
				}
			}
		})
	}
}

// TestU95IsTheBudgets: what Uncertainty gives is what the column was made from, whichever calibration holds.
func TestU95IsTheBudgets(t *testing.T) {
	p := planOf(t, meadowText)
	day := dayOf(t, equinox)
	j := p.NewJudged(day)
	b := inventedDays(p, day, 1, 7, false)
	p.Prepare(j, blockOf(p, b, day), 0, minute.PerDay)
	for i := range j.Series {
		s := &j.Series[i]
		for r := 0; r < minute.PerDay; r += 13 {
			budget, c := p.Uncertainty(j, s.Instrument, r)
			if budget == nil {
				if s.U95[r] == s.U95[r] {
					t.Fatalf("%s row %d: U95 %v without a budget", s.Instrument, r, s.U95[r])
				}
				continue
			}
			sum := 0.0
			for _, row := range budget.Components(&c) {
				sum += row.Standard * row.Standard
			}
			if want := uncertainty.Coverage * math.Sqrt(sum); !(math.Abs(s.U95[r]-want) <= 0.51/spreadPerUnit) {
				t.Fatalf("%s row %d: U95 %v, by the table %v", s.Instrument, r, s.U95[r], want)
			}
		}
	}
	if budget, c := p.Uncertainty(j, "nobody", 0); budget != nil || c.Value == c.Value {
		t.Error("an instrument that is not there has a budget")
	}
}

// TestNetLongwaveOfThePyrgeometer: where one beside it tells the net longwave, zero offset a follows it.
func TestNetLongwaveOfThePyrgeometer(t *testing.T) {
	p := planOf(t, meadowText)
	day := dayOf(t, equinox)
	j := p.NewJudged(day)
	p.Prepare(j, blockOf(p, inventedDays(p, day, 1, 7, false), day), 0, minute.PerDay)
	_, g := p.Uncertainty(j, "G1", 600)
	_, u := p.Uncertainty(j, "U1", 600)
	if down, up := j.Primary(rules.LWDown).net[600], j.Primary(rules.LWUp).net[600]; g.NetWm2 != down || u.NetWm2 != up || down != down || up != up {
		t.Errorf("net longwave: global has %v of %v, reflected %v of %v", g.NetWm2, down, u.NetWm2, up)
	}
}

// TestBeamOfTheMinute: the measured beam; while closure misses, as with a lost tracker, what global says if that is more.
func TestBeamOfTheMinute(t *testing.T) {
	const noon, midnight = 727, 60
	p := planOf(t, plainText)
	for _, x := range []struct {
		what     string
		row      int
		read     map[string]float64
		low, top float64
	}{
		{"measured", noon, map[string]float64{"ghi": 1000, "dni": 900, "dhi": 100}, 900, 900},
		{"tracker lost", noon, map[string]float64{"ghi": 1000, "dni": 5, "dhi": 1000.0 / 3}, 700, 1000},
		{"global alone", noon, map[string]float64{"ghi": 1000}, 700, 1000},
		{"overcast", noon, map[string]float64{"ghi": 150}, 0, 5},
		{"nothing of the sun", noon, map[string]float64{"lwd": 350}, 1000, 1120},
		{"night", midnight, map[string]float64{"ghi": 3, "lwd": 350}, 0, 0},
		{"direct without its closure", noon, map[string]float64{"dni": 800}, 800, 800},
		{"impossible direct", noon, map[string]float64{"ghi": 1000, "dni": 5000}, 700, 1000},
	} {
		j := judgedMinutes(t, p, equinox, map[int]map[string]float64{x.row: x.read})
		if b := j.beam[x.row]; !(b >= x.low && b <= x.top) {
			t.Errorf("%s: beam %v, want %v to %v", x.what, b, x.low, x.top)
		}
	}
}

// TestCertificateOfTheMinute: the certificate that holds, its age, and none where a voltage has no calibration.
func TestCertificateOfTheMinute(t *testing.T) {
	text := strings.Replace(fieldText, "from: 2020-01-01, sensitivity: 8.4, unit: uV/(W/m2)}",
		"from: 2020-01-01, to: 2026-03-20T12:00:00Z, sensitivity: 8.4, unit: uV/(W/m2), uncertainty: 2%}, "+
			"{from: 2026-03-20T12:00:00Z, to: 2026-03-20T12:10:00Z, sensitivity: 8.4, unit: uV/(W/m2), uncertainty: 1%}", 1)
	p := planOf(t, text)
	readings := map[int]map[string]float64{}
	for r := 715; r < 735; r++ {
		readings[r] = map[string]float64{"g1_mv": 6, "b1_mv": 5, "d1_mv": 1}
	}
	j := judgedMinutes(t, p, equinox, readings)
	u := j.Primary(rules.Global).U95
	if !(u[719] > u[720]+25) || u[730] == u[730] {
		t.Errorf("U95 about the change of the certificate and after its end: %v", u[715:735])
	}
	_, before := p.Uncertainty(j, "G1", 719)
	_, after := p.Uncertainty(j, "G1", 720)
	if math.Abs(before.Years-6.21) > 0.01 || after.Years != 0 {
		t.Errorf("age of the calibrations: %v and %v years", before.Years, after.Years)
	}
}

// TestRestoredU95: a restored value carries a larger uncertainty for as long as it is restored.
func TestRestoredU95(t *testing.T) {
	p := planOf(t, plainText)
	const noon = 727
	j := judgedMinutes(t, p, equinox, map[int]map[string]float64{noon: {"ghi": 1030, "dni": 900, "dhi": 100}})
	s := j.Primary(rules.Global)
	sound := s.U95[noon]
	offset := []fault.Episode{{Instrument: "G1", Kind: rules.ZeroOffset, Severity: rules.Act, From: j.Day * minute.PerDay, To: fault.Open,
		Evidence: []fault.Evidence{{Name: "offset", Value: 30, Unit: "W/m2"}}}}
	Settle(p, j, offset)
	budget, c := p.Uncertainty(j, "G1", noon)
	c.Value = 1000
	want := math.Sqrt(math.Pow(budget.U95(&c), 2) + math.Pow(2*(1+0.25*30)/math.Sqrt(3), 2))
	if !s.Restored[noon] || s.Value[noon] != 1000 || math.Abs(s.U95[noon]-want) > 0.51/spreadPerUnit {
		t.Errorf("restored %v: %v W/m2, U95 %v, want %v", s.Restored[noon], s.Value[noon], s.U95[noon], want)
	}
	Settle(p, j, nil)
	if s.U95[noon] != sound {
		t.Errorf("U95 %v once the episode is gone, before it %v", s.U95[noon], sound)
	}
}

// TestUncertaintyAllocatesNothing for a day of seven instruments.
func TestUncertaintyAllocatesNothing(t *testing.T) {
	p := planOf(t, meadowText)
	day := dayOf(t, equinox)
	j := p.NewJudged(day)
	p.Prepare(j, blockOf(p, inventedDays(p, day, 1, 7, false), day), 0, minute.PerDay)
	if n := testing.AllocsPerRun(10, func() { p.uncertainty(j, 0, minute.PerDay) }); n != 0 {
		t.Errorf("%v allocations a day", n)
	}
}

// BenchmarkUncertainty is the part of a day that U95 takes, for three irradiances and for seven with two pyrgeometers.
func BenchmarkUncertainty(b *testing.B) {
	for _, text := range []string{fieldText, meadowText} {
		p := planOf(b, text)
		day := dayOf(b, "2026-05-01")
		j := p.NewJudged(day)
		p.Prepare(j, blockOf(p, inventedDays(p, day, 1, 3, false), day), 0, minute.PerDay)
		b.Run(p.Station.ID, func(b *testing.B) {
			defer perMinute(b)()
			for range b.N {
				p.uncertainty(j, 0, minute.PerDay)
			}
		})
	}
}

// TestU95BeforeTheEpoch: a station without a calibration on a day before 1970, where minutes count below nothing.
func TestU95BeforeTheEpoch(t *testing.T) {
	j := judgedMinutes(t, planOf(t, plainText), "1969-12-31", map[int]map[string]float64{727: {"ghi": 500}})
	if u := j.Primary(rules.Global).U95; !(u[727] > 0) || u[728] == u[728] {
		t.Errorf("U95 %v", u[726:730])
	}
}
