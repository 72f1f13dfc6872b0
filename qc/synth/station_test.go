package synth

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"math"
	"reflect"
	"testing"

	"fluxwarden/qc/exact"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/sensor"
	"fluxwarden/rules"

	"pgregory.net/rapid"
)

// The whole state over days spread through a year: truth within the published limits that rules holds (Long and Shi 2008 as
// used by the baseline network), and the conservation laws that hold whatever the weather.
func TestSkyIsPhysical(t *testing.T) {
	for place := range places {
		t.Run(places[place].id, func(t *testing.T) {
			s := stationOf(t, place, 7)
			limits := rules.DefaultLimits()
			limits.RareLW[1] = rules.Band{Low: 60, High: 750} // the desert's own site file has it so: ground at 65 degrees C is no error there
			minutes, rare, beamMinutes, cloudless := 0, 0, 0, 0
			for day := range 73 {
				from := stamp(t, "2026-01-03T00:03:00Z") + minute.Stamp(5*day)*minute.MicrosPerDay
				for k := range 288 {
					n := s.skyAt(from + minute.Stamp(k)*5*minute.MicrosPerMinute)
					w := s.minuteState(minute.Stamp(n.seconds * minute.MicrosPerSecond).Minute())
					minutes++
					if s.outside(&n, w.extraWm2, limits.Possible, limits.PossibleLW) != "" {
						t.Fatalf("%v: %s is outside the possible: %+v", n.seconds, s.outside(&n, w.extraWm2, limits.Possible, limits.PossibleLW), n)
					}
					if what := s.outside(&n, w.extraWm2, limits.Rare, limits.RareLW); what != "" {
						rare++
					}
					if d := n.global - n.diffuse - n.direct*n.mu; math.Abs(d) > 1e-9 {
						t.Fatalf("%v: global is not diffuse and the beam: %v W/m2 over", n.seconds, d)
					}
					air := sensor.BlackbodyFlux(n.airC + sensor.ZeroCelsiusK)
					if n.lwDown < 0.4*air || n.lwDown > air+5 || n.lwDown > n.lwUp+25 || n.lwDown < n.lwUp-300 {
						t.Fatalf("%v: longwave %v down, %v up, %v of a black body at air temperature", n.seconds, n.lwDown, n.lwUp, air)
					}
					if n.direct > w.clearDirect*1.02+1 || n.direct < 0 || n.diffuse < 0 || n.reflected > n.global || n.humidityPct > 100 {
						t.Fatalf("%v: %+v", n.seconds, n)
					}
					if n.mu > 0.1 {
						beamMinutes++
						if n.direct > 0.9*w.clearDirect {
							cloudless++
						}
					}
				}
			}
			if share := float64(rare) / float64(minutes); share > 0.002 {
				t.Errorf("%.2f %% of the instants are outside the rare limits, want at most 0.2 %%", 100*share)
			}
			sunny := float64(cloudless) / float64(beamMinutes)
			if want := s.climate.ClearShare; sunny < want-0.12 || sunny > want+s.climate.BrokenShare {
				t.Errorf("the sun shines %.0f %% of the time: a climate of %+v should lie between clear and clear and broken", 100*sunny, s.climate)
			}
			t.Logf("%s: beam %.0f %% of the time with the sun up; %d of %d instants outside the rare limits", s.climate.Name, 100*sunny, rare, minutes)
		})
	}
}

func (s *Station) outside(n *now, extraWm2 float64, sun [4]rules.SunLimit, longwave [2]rules.Band) string {
	for q := rules.Global; q <= rules.Reflected; q++ {
		l := &sun[q]
		if v := n.quantity(q); v < l.Low || v > l.Factor*extraWm2*exact.Pow(n.mu, l.Power)+l.Offset {
			return q.String()
		}
	}
	for i, v := range []float64{n.lwDown, n.lwUp} {
		if v < longwave[i].Low || v > longwave[i].High {
			return (rules.LWDown + rules.Quantity(i)).String()
		}
	}
	return ""
}

// What a sound station says stays near the truth: within what its class allows, and closed within 2 %.
func TestSoundStationMeasures(t *testing.T) {
	for place, day := range []string{"2026-06-20", "2026-06-20", "2026-06-20", "2026-12-20"} {
		t.Run(places[place].id, func(t *testing.T) {
			for seed := range uint64(6) {
				s := stationOf(t, place, seed)
				at := s.Next(stamp(t, day+"T00:00:00Z"))
				for range 288 {
					at += 5 * minute.MicrosPerMinute
					checkSound(t, s, at)
				}
			}
		})
	}
}

func checkSound(t *testing.T, s *Station, at minute.Stamp) {
	t.Helper()
	r, truth := s.Sound(at), s.True(at)
	n := s.skyAt(s.start(at) + s.interval/2)
	by := map[rules.Quantity]float64{}
	for i := range s.rules.Instruments {
		in := &s.rules.Instruments[i]
		v := measured(s, &r, in.ID)
		if _, other := by[in.Measures]; !other {
			by[in.Measures] = v
		}
		low, high := truth[i], truth[i]
		if s.samples == 1 { // what lags behind lies within what was true during its memory
			for k := range minute.Stamp(25) {
				past := s.True(at - k*minute.MicrosPerSecond)[i]
				low, high = math.Min(low, past), math.Max(high, past)
			}
		}
		off := math.Max(low-v, v-high)
		allowed := 4 + 0.03*math.Abs(truth[i]) // noise and calibration; the temperature response that the certificate states is not taken out here
		if in.Measures.Shortwave() {
			allowed += 0.5 * rules.ClassZeroWm2(in.Class, in.Measures)
		}
		if off > allowed {
			t.Errorf("%s %s seed: %v says %.2f, true is %.2f: %.2f off, %.2f allowed", s.rules.ID, in.ID, at, v, truth[i], off, allowed)
		}
		if night := n.up < -0.2; night && in.Measures.Shortwave() && (math.Abs(v) > rules.ClassZeroWm2(in.Class, in.Measures) || v > 2) {
			t.Errorf("%s %s: %.2f at night: class %s may have %v", s.rules.ID, in.ID, v, in.Class, rules.ClassZeroWm2(in.Class, in.Measures))
		}
	}
	g, haveG := by[rules.Global]
	d, haveD := by[rules.Diffuse]
	if b := by[rules.Direct]; haveG && haveD && n.mu > 0.26 && g > 50 && s.samples > 1 { // zenith below 75 degrees
		if sum := d + b*n.mu; math.Abs(g/sum-1) > 0.02 {
			t.Errorf("%s %v: closure %.4f: global %.1f, direct %.1f, diffuse %.1f, mu %.4f", s.rules.ID, at, g/sum, g, b, d, n.mu)
		}
	}
}

// Golden: the same seed gives the same readings on every machine. A change of the model changes it on purpose.
func TestGoldenReadings(t *testing.T) {
	const want = "1f7f7c20b387f33df9055e9c795242dc87249f5486f3b40dc7f411666974ac0f"
	h := sha256.New()
	for place := range places {
		s := stationOf(t, place, 20260621)
		for _, fault := range []rules.FaultKind{rules.Noise, rules.DomeSoiled} {
			if err := s.AddFault(Fault{Kind: fault, Instrument: "G1", From: stamp(t, "2026-06-21T05:00:00Z"), To: stamp(t, "2026-06-21T11:00:00Z")}); err != nil {
				t.Fatal(err)
			}
		}
		at := s.Next(stamp(t, "2026-06-21T04:00:00Z"))
		for range 200 {
			fmt.Fprintf(h, "%v\n", s.Reading(at).Values)
			at += s.Next(minute.Stamp(97 * minute.MicrosPerSecond))
		}
	}
	if got := hex.EncodeToString(h.Sum(nil)); got != want {
		t.Errorf("golden digest of the synthetic readings is %s, want %s", got, want)
	}
}

// A record depends on nothing but its stamp: asked again, in any order, by another copy, it is the same.
func TestOrderDoesNotMatter(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		place := rapid.IntRange(0, len(places)-1).Draw(rt, "place")
		seed := rapid.Uint64().Draw(rt, "seed")
		a, b := stationOf(t, place, seed), stationOf(t, place, seed)
		first := int64(stamp(t, "2026-01-01T00:00:00Z"))
		stamps := rapid.SliceOfN(rapid.Int64Range(0, 365*1440*6), 2, 12).Draw(rt, "stamps")
		before := make([]minute.Reading, len(stamps))
		for i, k := range stamps {
			before[i] = a.Reading(a.Next(minute.Stamp(first + k*10*minute.MicrosPerSecond)))
		}
		for i := len(stamps) - 1; i >= 0; i-- {
			if again := b.Reading(before[i].At); fmt.Sprint(again) != fmt.Sprint(before[i]) {
				rt.Fatalf("at %d: %v, then %v", before[i].At, before[i], again)
			}
		}
	})
}

// Another seed is other weather, and a station of another name has its own.
func TestSeedsDiffer(t *testing.T) {
	at := stamp(t, "2026-06-21T10:00:00Z")
	a, b := stationOf(t, 0, 1).Reading(at), stationOf(t, 0, 2).Reading(at)
	if reflect.DeepEqual(a.Values, b.Values) {
		t.Error("two seeds gave one reading")
	}
}

// Every channel that the site file names is sent, and no other.
func TestEveryChannelIsSent(t *testing.T) {
	for place := range places {
		s := stationOf(t, place, 3)
		want := map[string]bool{}
		for i := range s.rules.Instruments {
			in := &s.rules.Instruments[i].Input
			for _, c := range []string{in.Signal, in.Irradiance, in.Case, in.Dome} {
				if c != "" {
					want[c] = true
				}
			}
		}
		for _, w := range s.rules.Weather {
			want[w.Channel] = true
		}
		for _, h := range s.rules.Housekeeping {
			want[h.Channel] = true
		}
		r := s.Reading(s.Next(stamp(t, "2026-06-21T10:00:00Z")))
		for _, v := range r.Values {
			if !want[v.Channel] || math.IsNaN(v.Mean) || math.IsInf(v.Mean, 0) {
				t.Errorf("%s: sends %s %v", s.rules.ID, v.Channel, v.Mean)
			}
			delete(want, v.Channel)
		}
		if len(want) > 0 {
			t.Errorf("%s: does not send %v", s.rules.ID, want)
		}
	}
}

// A normal value is normal enough: mean 0, variance 1 within five standard errors of 20,000 draws; smooth keeps the variance.
func TestChance(t *testing.T) {
	const count = 20000
	draw := map[string]func(i int64) float64{
		"normal": source(5).normal,
		"smooth": func(i int64) float64 { return source(5).smooth(float64(i)*137.3, 100) },
	}
	for name, f := range draw {
		var sum, squares float64
		for i := range int64(count) {
			v := f(i)
			sum, squares = sum+v, squares+v*v
		}
		mean, variance := sum/count, squares/count
		if math.Abs(mean) > 5/math.Sqrt(count) || math.Abs(variance-1) > 0.07 {
			t.Errorf("%s: mean %.4f, variance %.4f", name, mean, variance)
		}
	}
	if p := share(quantile(0.3)); math.Abs(p-0.3) > 1e-12 {
		t.Errorf("share does not undo quantile: %v", p)
	}
}

func BenchmarkReading(b *testing.B) {
	for place := range places {
		b.Run(places[place].id, func(b *testing.B) {
			s := stationOf(b, place, 1)
			at := s.Next(stamp(b, "2026-06-21T10:00:00Z"))
			b.ReportAllocs()
			for range b.N {
				s.Reading(at)
				at += s.interval
			}
		})
	}
}
