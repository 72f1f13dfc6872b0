package fault

import (
	"encoding/json"
	"math"
	"slices"
	"testing"

	"fluxwarden/qc/sky"
	"fluxwarden/qc/sun"
	"fluxwarden/rules"

	"pgregory.net/rapid"
)

// whole is the setup of a station with every instrument; the volts' coefficients stand in the order of the quantities.
func whole() *Setup {
	s := &Setup{Station: "moor", LatitudeDeg: 50, PressureHPa: 978, Sky: SkySetup{Site: sky.NewSite(sky.BirdHulstrom, 300, 978)}, GapMinutes: 30}
	for q := range s.Instruments {
		s.Instruments[q] = Instrument{ID: []string{"G1", "P1", "D1", "R1", "L1", "U1", "V1", "Q1"}[q], Class: "A", Present: true, Volts: true, SensitivityUVPerW: 8 + float64(q)}
	}
	s.Instruments[rules.LWDown].HasBody = true
	return s
}

// A histogram's quantile is the exact one to within a step, whatever the order of the values; what lies outside counts at its end.
func TestHistogram(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		values := rapid.SliceOfN(rapid.Float64Range(-3, 5), 1, 400).Draw(t, "values")
		p := rapid.SampledFrom([]float64{0.25, 0.5, 0.75}).Draw(t, "p")
		h := newHistogram(-2, 4, 0.05)
		for _, v := range values {
			h.add(v)
			h.add(math.NaN())
		}
		sorted := slices.Clone(values)
		slices.Sort(sorted)
		k := min(int(p*float64(len(sorted))), len(sorted)-1)
		want := math.Min(math.Max(sorted[k], -2), 4)
		if got := h.quantile(p); math.Abs(got-want) > 0.05/2+1e-9 || h.n != len(values) {
			t.Fatalf("quantile %v of %d is %v, want %v", p, h.n, got, want)
		}
		slices.Reverse(values)
		back := newHistogram(-2, 4, 0.05)
		for _, v := range values {
			back.add(v)
		}
		if back.fact() != h.fact() {
			t.Fatalf("in another order it says %+v, not %+v", back.fact(), h.fact())
		}
	})
	empty := newHistogram(0, 1, 0.1)
	if f := empty.fact(); f.N != 0 || !math.IsNaN(f.Median.Float()) || !math.IsNaN(f.Spread.Float()) {
		t.Errorf("of nothing it says %+v", f)
	}
}

// hints plays hints to one suspicion, a minute each, from minute first on, and gives the episodes.
func hints(first int64, c *faultCase, odds []float64) (*Watcher, []Episode) {
	w := NewWatcher(whole(), first/1440, nil, nil)
	for k, o := range odds {
		w.now.minute = first + int64(k)
		w.step(0, c, hint{odds: o, number: float64(k)})
	}
	return w, w.Episodes()
}

// The cumulative sum: its rise from nothing is the beginning, crossing the odds is the raising, its fall to nothing the end, dated
// back to the last minute that spoke for it; it grows no further than its top.
func TestSuspicion(t *testing.T) {
	const first = int64(29000000)
	c := func(quiet int64) *faultCase {
		return &faultCase{kind: rules.SignalFrozen, quantity: rules.LWDown, raise: 3, most: 5, quiet: quiet, number: "n", unit: "1"}
	}
	repeat := func(v float64, n int) []float64 { return slices.Repeat([]float64{v}, n) }
	long := slices.Concat(repeat(0.0001, 20*1440), repeat(1, 3))
	type want struct{ from, raised, to int64 } // minutes after first; to -1 is open
	for _, k := range []struct {
		name  string
		quiet int64
		odds  []float64
		want  []want
	}{
		{"too little", 0, repeat(1, 2), nil},
		{"raised", 0, repeat(1, 3), []want{{0, 2, -1}}},
		{"a rise that fell back does not count for the beginning", 0, []float64{1, 1, -3, 0, 0, 1, 1, 1}, []want{{5, 7, -1}}},
		{"what speaks against it before it began is nothing", 0, []float64{-50, -50, 1, 1, 1}, []want{{2, 4, -1}}},
		{"it ends at the last minute for it", 0, []float64{1, 1, 1, 0, 0, -2, -2}, []want{{0, 2, 3}}},
		{"its top bounds how much it takes to end it", 0, slices.Concat(repeat(1, 100), repeat(-1, 5)), []want{{0, 2, 100}}},
		{"less does not end it", 0, slices.Concat(repeat(1, 100), repeat(-1, 4)), []want{{0, 2, -1}}},
		{"nothing said for long lets it go", 10, slices.Concat(repeat(1, 3), repeat(0, 11)), []want{{0, 2, 3}}},
		{"not yet", 10, slices.Concat(repeat(1, 3), repeat(0, 10)), []want{{0, 2, -1}}},
		{"never, where it may be silent", 0, slices.Concat(repeat(1, 3), repeat(0, 5000)), []want{{0, 2, -1}}},
		{"again", 0, slices.Concat(repeat(1, 3), repeat(-3, 2), repeat(0, 5), repeat(3, 1)), []want{{0, 2, 3}, {10, 10, -1}}},
		{"hindsight reaches ten days", 0, long, []want{{20*1440 - 10*1440, 20 * 1440, -1}}},
	} {
		_, got := hints(first, c(k.quiet), k.odds)
		if len(got) != len(k.want) {
			t.Errorf("%s: %d episodes, want %d: %+v", k.name, len(got), len(k.want), got)
			continue
		}
		for i, e := range got {
			x := k.want[i]
			to := first + x.to
			if x.to < 0 {
				to = Open
			}
			if e.From != first+x.from || e.Raised != first+x.raised || e.To != to || e.Instrument != "L1" || e.Kind != rules.SignalFrozen {
				t.Errorf("%s: from %d, raised %d, to %d, want %+v", k.name, e.From-first, e.Raised-first, e.To-first, x)
			}
		}
	}
}

// An open episode is told once, and its evidence is the mean of the minutes for it; it stands still once enough have been seen.
func TestSuspicionEvidence(t *testing.T) {
	c := &faultCase{kind: rules.SignalFrozen, quantity: rules.LWDown, raise: 3, most: 5, number: "n", unit: "1"}
	w, got := hints(0, c, slices.Repeat([]float64{1}, 11))
	if len(got) != 1 || got[0].Evidence[0] != (Evidence{"minutes", 11, "min"}) || got[0].Evidence[1] != (Evidence{"n", 5, "1"}) {
		t.Errorf("evidence of eleven minutes 0..10: %+v", got)
	}
	w.step(1, &faultCase{kind: rules.SignalFrozen, quantity: rules.LWDown, raise: 1, most: 5}, hint{odds: 4})
	if n := len(w.Episodes()); n != 1 {
		t.Errorf("%d episodes of one kind at one instrument", n)
	}
	_, got = hints(0, c, slices.Repeat([]float64{1}, 2*evidenceSettles))
	if got[0].Evidence[0].Value != evidenceSettles {
		t.Errorf("the evidence rests on %v minutes, it should settle at %d", got[0].Evidence[0].Value, evidenceSettles)
	}
}

// The sun some minutes ago against its own position then. Declination and the equation of time change by at most 0.4 degrees and half a
// minute a day, so 200 minutes are good to 0.002.
func TestMuMinutesAgo(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		site := sun.Site{LatitudeDeg: rapid.Float64Range(-75, 75).Draw(t, "latitude"), LongitudeDeg: rapid.Float64Range(-180, 180).Draw(t, "longitude")}
		day := rapid.Int64Range(18000, 24000).Draw(t, "day")
		ago := rapid.Int64Range(-200, 200).Draw(t, "minutes ago")
		second := float64(60 * rapid.IntRange(200, 1239).Draw(t, "minute"))
		d := sun.NewDay(day, site)
		now := d.AtMinute(second)
		if now.CosZenith < 0.01 {
			t.Skip("night")
		}
		w := &Watcher{setup: &Setup{LatitudeDeg: site.LatitudeDeg}}
		v := &view{mu: now.CosZenith, azimuthDeg: now.AzimuthDeg}
		want := d.AtMinute(second - float64(60*ago)).CosZenith
		if got := w.muMinutesAgo(v, ago); math.Abs(got-want) > 0.002 {
			t.Fatalf("%d minutes before: %v, it was %v", ago, got, want)
		}
	})
}

// planted is a clear day's imbalance of an instrument that is off: what gather would have summed.
func planted(t *rapid.T, gainG, gainP, gainD, tiltE, tiltN float64) *imbalance {
	latitude := rapid.Float64Range(25, 55).Draw(t, "latitude") * float64(1-2*rapid.IntRange(0, 1).Draw(t, "south"))
	d := sun.NewDay(20000+rapid.Int64Range(0, 364).Draw(t, "day"), sun.Site{LatitudeDeg: latitude})
	im := &imbalance{}
	noise := uint64(rapid.Uint32().Draw(t, "noise"))
	for m := range 1440 {
		p := d.AtMinute(float64(60*m + 30))
		if p.CosZenith < 0.15 {
			continue
		}
		noise = noise*6364136223846793005 + 1442695040888963407
		flicker := 0.004 * (float64(noise>>11)/(1<<53) - 0.5)
		b, diffuse := 900*math.Sqrt(p.CosZenith), 60+80*p.CosZenith
		sinZ := math.Sqrt(1 - p.CosZenith*p.CosZenith)
		lever := sinZ * (tiltE*sinDeg(p.AzimuthDeg) + tiltN*cosDeg(p.AzimuthDeg))
		g := (1 + gainG + flicker) * (diffuse + b*(p.CosZenith+lever))
		b, diffuse = b*(1+gainP), diffuse*(1+gainD)
		sum := b*p.CosZenith + diffuse
		x := [regressors]float64{1, b * p.CosZenith / sum, b * sinZ / sum * sinDeg(p.AzimuthDeg), b * sinZ / sum * cosDeg(p.AzimuthDeg)}
		im.Sums.add(x, g/sum-1)
		im.N++
	}
	if im.N < 60 {
		t.Skip("hardly any sun")
	}
	return im
}

// What is planted is found again. A tilt is drawn a little towards none (the ridge): under a sun that passes overhead its north part hardly shows,
// so the tropics are left out here.
func TestFitsFindWhatWasPlanted(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		gain := rapid.Float64Range(0.03, 0.2).Draw(t, "gain") * float64(1-2*rapid.IntRange(0, 1).Draw(t, "sign"))
		got, misfit := planted(t, gain, 0, 0, 0, 0).fitOne(0)
		if math.Abs(got-gain) > 0.002 || misfit > 2 {
			t.Fatalf("gain of global %v, misfit %v", got, misfit)
		}
		got, misfit = planted(t, 0, gain, 0, 0, 0).fitOne(1)
		if want := -gain / (1 + gain); math.Abs(got-want) > 0.002 || misfit > 2 { // its share is counted with the gain in it
			t.Fatalf("gain of direct %v, want %v, misfit %v", got, want, misfit)
		}
		got, misfit = planted(t, 0, 0, gain, 0, 0).fitDiffuse()
		if want := gain / (1 + gain); math.Abs(got-want) > 0.008 || misfit > 2 {
			t.Fatalf("gain of diffuse %v, want %v, misfit %v", got, want, misfit)
		}
	})
	rapid.Check(t, func(t *rapid.T) {
		tilt := rapid.Float64Range(1, 5).Draw(t, "degrees") * math.Pi / 180
		towards := rapid.Float64Range(0, 360).Draw(t, "towards")
		im := planted(t, 0, 0, 0, tilt*sinDeg(towards), tilt*cosDeg(towards))
		east, north, misfit := im.fitTilt()
		off := math.Hypot(east-tilt*sinDeg(towards), north-tilt*cosDeg(towards)) * 180 / math.Pi
		if off > 0.1+0.1*tilt*180/math.Pi || misfit > 4 {
			t.Fatalf("tilt to the east %v, to the north %v: %v degrees off, misfit %v", east, north, off, misfit)
		}
		back := math.Abs(math.Mod(bearing(east, north)-towards+540, 360) - 180)
		if back > 15 {
			t.Fatalf("leans towards %v, want %v", bearing(east, north), towards)
		}
	})
}

// A number that JSON cannot write is null, and every other comes back to the bit.
func TestNumber(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		v := rapid.Float64().Draw(t, "v")
		text, err := json.Marshal(Number(v))
		var back Number
		if err == nil {
			err = json.Unmarshal(text, &back)
		}
		if err != nil || math.Float64bits(back.Float()) != math.Float64bits(v) && !(math.IsNaN(back.Float()) && (math.IsNaN(v) || math.IsInf(v, 0))) {
			t.Fatalf("%v was written %s and read %v: %v", v, text, back, err)
		}
	})
	var n Number
	if err := json.Unmarshal([]byte(`"x"`), &n); err == nil {
		t.Error("a text was read as a number")
	}
}
