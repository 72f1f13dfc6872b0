package product

import (
	"math"
	"testing"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store/table"

	"pgregory.net/rapid"
)

const irradianceStep = table.StepIrradiance

// TestHourDayMonthAgainstDirectSums holds the means against sums written out here from the definitions, for a month with gaps of every
// sort. The sums take the values as the table of minutes has them, rounded to 1/64 W/m2.
func TestHourDayMonthAgainstDirectSums(t *testing.T) {
	s := plain()
	s.verdict = func(q rules.Quantity, day, m int) rules.Verdict {
		switch k := (int(q)*7 + day*31 + m*13) % 97; {
		case k < 4:
			return rules.Absent
		case k < 7:
			return rules.Questioned
		case k < 9 || q == rules.Reflected && day%5 == 1 && m/60 == 9:
			return rules.Rejected
		}
		return rules.Accepted
	}
	global := s.value[rules.Global]
	s.value[rules.Global] = func(day, m int) float64 { return global(day, m) * (1 - 0.5*float64(day%4)/4) }
	minutes := s.minutes(0, 29)
	p := Make(minutes, Settings{}, true)
	for _, q := range []rules.Quantity{rules.Global, rules.Reflected, rules.LWDown, rules.AirTemperature} {
		c := table.QuantityColumn(q)
		values, verdicts := minutes.Vectors[c].Doubles, minutes.Vectors[c+1]
		ok := func(r int) bool { return verdicts.Dict[verdicts.Codes[r]] == "accepted" }
		hours := make([]float64, 30*24)
		for h := range hours {
			sum, n := 0.0, 0
			for r := 60 * h; r < 60*h+60; r++ {
				if ok(r) {
					sum, n = sum+values[r], n+1
				}
			}
			hours[h] = sum / float64(n)
			if n < 48 {
				hours[h] = math.NaN()
			}
			near(t, q.String()+" hour", cell(t, p.Hours, q.String(), h), hours[h], irradianceStep/2)
			near(t, q.String()+" minutes of an hour", cell(t, p.Hours, q.String()+"_n", h), float64(n), 0)
		}
		for d := range 30 {
			sum := 0.0
			for h := range 24 {
				sum += hours[24*d+h]
			}
			near(t, q.String()+" day", cell(t, p.Days, q.String(), d), sum/24, irradianceStep/2)
		}
		month := 0.0
		for b := range 96 {
			sum, n := 0.0, 0
			for d := range 30 {
				for r := 1440*d + 15*b; r < 1440*d+15*b+15; r++ {
					if ok(r) {
						sum, n = sum+values[r], n+1
					}
				}
			}
			month += sum / float64(n) / 96
		}
		near(t, q.String()+" month", cell(t, p.Month, q.String(), 0), month, irradianceStep/2)
	}
	withheld := 0
	for d := range 30 {
		withheld += count(math.IsNaN(cell(t, p.Days, "reflected", d)))
	}
	if withheld != 6 {
		t.Errorf("%d days of reflected withheld, want the 6 with an hour missing by day", withheld)
	}
	near(t, "days of reflected", cell(t, p.Month, "reflected_days", 0), 24, 0)
	near(t, "length", cell(t, p.Month, "minutes", 0), 43_200, 0)
}

// TestOnlySunlitMinutes: a station that sends no shortwave by night. The mean of its minutes would be that of the day's lit half, twice the
// day's mean. Longwave has no night to leave out.
func TestOnlySunlitMinutes(t *testing.T) {
	s := plain()
	s.verdict = func(q rules.Quantity, _, m int) rules.Verdict {
		if zenithOf(m) > 93 && (q.Shortwave() || q == rules.LWDown) {
			return rules.Absent
		}
		return rules.Accepted
	}
	p := s.day(t, Settings{})
	// The mean of 1000 cos over half a turn is 1000 * 2/pi; half of it for the whole day.
	near(t, "global", cell(t, p.Days, "global", 0), 1000/math.Pi, 0.02)
	near(t, "shortwave_down", cell(t, p.Days, "shortwave_down", 0), 1000/math.Pi, 0.02)
	near(t, "hours in the dark", cell(t, p.Days, "global_hours_dark", 0), 12, 0)
	near(t, "hours", cell(t, p.Days, "global_hours", 0), 12, 0)
	near(t, "lw_down", cell(t, p.Days, "lw_down", 0), math.NaN(), 0)
	near(t, "lw_up", cell(t, p.Days, "lw_up", 0), 400, 0)
	near(t, "net radiation wants the longwave", cell(t, p.Days, "net_radiation", 0), math.NaN(), 0)
}

// TestAnHourOfDayMissing: an hour with the sun above 5 degrees may not be missing; one with the sun below may, and it counts as nothing.
func TestAnHourOfDayMissing(t *testing.T) {
	for hour, want := range map[int]float64{10: math.NaN(), 6: math.NaN(), 5: 1000 / math.Pi, 18: 1000 / math.Pi} {
		s := plain()
		s.verdict = func(q rules.Quantity, _, m int) rules.Verdict {
			if q == rules.Global && m/60 == hour {
				return rules.Rejected
			}
			return rules.Accepted
		}
		near(t, "day", cell(t, s.day(t, Settings{}).Days, "global", 0), want, 0.02)
	}
}

func TestCoverageOfAnHour(t *testing.T) {
	for missing, want := range map[int]float64{12: 300, 13: math.NaN()} {
		s := plain()
		s.verdict = func(q rules.Quantity, _, m int) rules.Verdict {
			if q == rules.LWDown && m%60 < missing {
				return rules.Questioned
			}
			return rules.Accepted
		}
		p := s.day(t, Settings{})
		near(t, "hour", cell(t, p.Hours, "lw_down", 3), want, 0)
		near(t, "minutes that it stands on", cell(t, p.Hours, "lw_down_n", 3), float64(60-missing), 0)
		near(t, "questioned ones", cell(t, p.Hours, "lw_down_questioned", 3), float64(missing), 0)
		near(t, "day", cell(t, p.Days, "lw_down", 0), want, 0)
		near(t, "minute left out", cell(t, p.Minutes, "lw_down", 0), math.NaN(), 0)
		near(t, "minute kept", cell(t, p.Minutes, "lw_down", 59), 300, 0)
	}
}

// TestGapsAtNoon: every third day lacks the hours around noon. The mean of all minutes is biased low by it, that of the month is not.
func TestGapsAtNoon(t *testing.T) {
	s := plain()
	s.verdict = func(q rules.Quantity, day, m int) rules.Verdict {
		if q == rules.Global && day%3 == 0 && m >= 600 && m < 840 {
			return rules.Absent
		}
		return rules.Accepted
	}
	p := Make(s.minutes(0, 29), Settings{}, true)
	near(t, "month", cell(t, p.Month, "global", 0), 1000/math.Pi, 0.02)
	near(t, "days with a mean", cell(t, p.Month, "global_days", 0), 20, 0)
	sum, n := 0.0, 0
	for _, x := range p.Minutes.Find("global").Doubles {
		if x == x {
			sum, n = sum+x, n+1
		}
	}
	if plainMean := sum / float64(n); plainMean > 1000/math.Pi-30 {
		t.Errorf("the mean of all minutes is %v: the gaps are no trap", plainMean)
	}
}

// TestDaysMissing: nine days without any data leave a month, ten do not (World Radiation Data Centre).
func TestDaysMissing(t *testing.T) {
	for missing, want := range map[int]float64{9: 300, 10: math.NaN()} {
		s := plain()
		s.verdict = func(q rules.Quantity, day, _ int) rules.Verdict {
			if q == rules.LWDown && day < missing {
				return rules.Rejected
			}
			return rules.Accepted
		}
		near(t, "month", cell(t, Make(s.minutes(0, 29), Settings{}, true).Month, "lw_down", 0), want, 0)
	}
	// a quarter of an hour that is missing all month
	s := plain()
	s.verdict = func(q rules.Quantity, day, m int) rules.Verdict {
		if q == rules.LWDown && m/15 == 40 && day%6 != 0 {
			return rules.Rejected
		}
		return rules.Accepted
	}
	m := Make(s.minutes(0, 29), Settings{}, true).Month
	near(t, "month with 5 of 30 days in a quarter", cell(t, m, "lw_down", 0), math.NaN(), 0)
	near(t, "quarters", cell(t, m, "lw_down_quarters", 0), 95, 0)
}

// TestNegativesAtNight: all are kept or all are set to zero; what is above zero stays either way, and so does longwave.
func TestNegativesAtNight(t *testing.T) {
	s := plain()
	s.value[rules.Diffuse] = func(_, m int) float64 {
		if zenithOf(m) > 90 {
			return []float64{-2, 1}[m%2]
		}
		return 0
	}
	s.value[rules.LWUp] = func(int, int) float64 { return -1 }
	kept, zero := s.day(t, Settings{}), s.day(t, Settings{NightZero: true})
	near(t, "kept", cell(t, kept.Minutes, "diffuse", 0), -2, 0)
	near(t, "zero", cell(t, zero.Minutes, "diffuse", 0), 0, 0)
	near(t, "above zero", cell(t, zero.Minutes, "diffuse", 1), 1, 0)
	near(t, "hour kept", cell(t, kept.Hours, "diffuse", 1), -0.5, 0)
	near(t, "hour zero", cell(t, zero.Hours, "diffuse", 1), 0.5, 0)
	near(t, "longwave", cell(t, zero.Hours, "lw_up", 1), -1, 0)
	negative := func(p Products) (n int) {
		for r, x := range p.Minutes.Find("diffuse").Doubles {
			if x < 0 && cell(t, p.Minutes, "zenith_deg", r) > 93 {
				n++
			}
		}
		return n
	}
	if a, b := negative(kept), negative(zero); a == 0 || b != 0 {
		t.Errorf("%d negatives kept of a night, %d after setting them to zero", a, b)
	}
}

// TestAlbedoIsARatioOfSums: 0.1 under a high sun and 0.5 under a low one. The mean of the minutes' ratios is another.
func TestAlbedoIsARatioOfSums(t *testing.T) {
	s := plain()
	s.value[rules.Reflected] = func(day, m int) float64 {
		if zenithOf(m) < 45 {
			return 0.1 * s.value[rules.Global](day, m)
		}
		return 0.5 * s.value[rules.Global](day, m)
	}
	p := s.day(t, Settings{})
	// Of the integral of cos over the day, sin 45 is under the high sun, 1 - sin 45 less the last 5 degrees' 1 - sin 85 under the low one.
	high := math.Sin(math.Pi / 4)
	low := math.Sin(85*math.Pi/180) - high
	near(t, "albedo", cell(t, p.Days, "albedo", 0), (0.1*high+0.5*low)/(high+low), 1e-3)
	sum, n := 0.0, 0
	for _, x := range p.Minutes.Find("albedo").Doubles {
		if x == x {
			sum, n = sum+x, n+1
		}
	}
	if mean := sum / float64(n); mean < 0.25 {
		t.Errorf("the mean of the ratios is %v: low sun is no trap", mean)
	}
	near(t, "hour", cell(t, p.Hours, "albedo", 12), 0.1, 1e-3)
	near(t, "night", cell(t, p.Hours, "albedo", 1), math.NaN(), 0)
}

// TestBudget works the plain station by hand: net shortwave 0.8 of 1000/pi, longwave -100.
func TestBudget(t *testing.T) {
	p := plain().day(t, Settings{})
	near(t, "net shortwave", cell(t, p.Days, "net_shortwave", 0), 800/math.Pi, 0.02)
	near(t, "net longwave", cell(t, p.Days, "net_longwave", 0), -100, 0)
	near(t, "net", cell(t, p.Days, "net_radiation", 0), 800/math.Pi-100, 0.02)
	near(t, "sunshine", cell(t, p.Days, "sunshine", 0), 0.5, 1e-3)
	near(t, "cloud longwave", cell(t, p.Hours, "cloud_longwave", 3), 20, 0)
	if v := p.Minutes.Find("shortwave_down_source"); v.Dict[v.Codes[720]] != "parts" {
		t.Errorf("source at noon: %s", v.Dict[v.Codes[720]])
	}
}

// TestUncertaintyOfMeans: what is correlated stays, what is not shrinks with the root of the number, what a gap adds is one standard
// deviation for the share that is missing.
func TestUncertaintyOfMeans(t *testing.T) {
	s := plain()
	p := s.day(t, Settings{})
	near(t, "correlated", cell(t, p.Hours, "lw_down_u95", 3), 10, table.StepSpread/2)
	near(t, "correlated, day", cell(t, p.Days, "lw_down_u95", 0), 10, table.StepSpread/2)
	near(t, "two instruments", cell(t, p.Days, "net_longwave_u95", 0), 10*math.Sqrt2, table.StepSpread/2)
	// All of 10 W/m2 from sampling: k=2 times 30 over the root of 36. An hour of 60 minutes divides it by the root of 60.
	s.sd, s.n = 30, 36
	p = s.day(t, Settings{})
	near(t, "independent", cell(t, p.Hours, "lw_down_u95", 3), 10/math.Sqrt(60), table.StepSpread/2)
	near(t, "independent, day", cell(t, p.Days, "lw_down_u95", 0), 10/math.Sqrt(1440), table.StepSpread/2)
	// 12 minutes missing, the others alternate between 290 and 310: standard deviation 10 * sqrt(48/47), times 2 times 0.2.
	s = plain()
	s.value[rules.LWDown] = func(_, m int) float64 { return 290 + 20*float64(m%2) }
	s.verdict = func(q rules.Quantity, _, m int) rules.Verdict {
		if m%60 < 12 {
			return rules.Absent
		}
		return rules.Accepted
	}
	p = s.day(t, Settings{})
	near(t, "gap", cell(t, p.Hours, "lw_down_u95", 3), math.Hypot(10, 4*math.Sqrt(48.0/47)), table.StepSpread/2)
	// A month of days at 290 and 310 of which 10 of 30 are missing... nine are: 2 * sd * sqrt(1/21 - 1/30) beside the 10.
	s.value[rules.LWDown] = func(day, _ int) float64 { return 290 + 20*float64(day%2) }
	s.verdict = func(q rules.Quantity, day, _ int) rules.Verdict {
		if day >= 21 {
			return rules.Absent
		}
		return rules.Accepted
	}
	m := Make(s.minutes(0, 29), Settings{}, true).Month
	squares := 0.0
	mean := 290 + 20*10.0/21
	for d := range 21 {
		squares += 15 * math.Pow(290+20*float64(d%2)-mean, 2)
	}
	sd := math.Sqrt(squares / (21*15 - 1))
	near(t, "month", cell(t, m, "lw_down_u95", 0), math.Hypot(10, 2*sd*math.Sqrt(1.0/21-1.0/30)), table.StepSpread/2)
}

// TestADayIsTheSameInAMonth: the products of a day do not depend on which days stand in the table with it.
func TestADayIsTheSameInAMonth(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		s := plain()
		seed := rapid.IntRange(0, 1<<20).Draw(t, "seed")
		without := rules.Quantity(rapid.IntRange(0, rules.QuantityCount-1).Draw(t, "without"))
		s.verdict = func(q rules.Quantity, day, m int) rules.Verdict {
			return rules.Verdict((seed + int(q)*3 + day*m/7) % 11 % rules.VerdictCount)
		}
		delete(s.value, without)
		months := s.minutes(0, 1)
		all := Make(months, Settings{NightZero: seed%2 == 0}, true)
		for d := range 2 {
			one := Make(s.minutes(d, d), Settings{NightZero: seed%2 == 0}, false)
			for name, x := range map[string]struct {
				columns   []table.Column
				all, one  *table.Table
				from, len int
			}{
				"minutes": {MinuteColumns(), all.Minutes, one.Minutes, d * minute.PerDay, minute.PerDay},
				"hours":   {HourColumns(), all.Hours, one.Hours, d * 24, 24},
				"days":    {DayColumns(), all.Days, one.Days, d, 1},
			} {
				if a, b := table.DigestOf(x.columns, x.all, x.from, x.from+x.len), table.DigestOf(x.columns, x.one, 0, x.len); a != b {
					t.Fatalf("%s of day %d: %s in the month, %s alone", name, d, a, b)
				}
			}
		}
	})
}

// TestNothing: tables without rows or without shortwave.
func TestNothing(t *testing.T) {
	p := Make(table.NewMinutes(0), Settings{}, true)
	if p.Minutes.Rows+p.Hours.Rows+p.Days.Rows != 0 || p.Month != nil {
		t.Error("products of no minutes")
	}
	s := plain()
	s.value = map[rules.Quantity]func(day, m int) float64{rules.AirTemperature: s.value[rules.AirTemperature]}
	p = s.day(t, Settings{})
	near(t, "air temperature", cell(t, p.Days, "air_temperature", 0), 15, 0.02)
	for _, name := range []string{"sunshine", "cloud_global", "cloud_net", "global", "global_n", "albedo"} {
		near(t, name, cell(t, p.Days, name, 0), math.NaN(), 0)
	}
}

func BenchmarkMonth(b *testing.B) {
	t := plain().minutes(0, 29)
	for b.Loop() {
		Make(t, Settings{}, true)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(t.Rows), "ns/minute")
}
