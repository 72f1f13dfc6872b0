package sun

import (
	"compress/gzip"
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"testing"
	"time"

	"pgregory.net/rapid"
)

// Meeus 1998, example 47.a (from memory): 1992 April 12, 0h TD.
func TestMoonWorkedExample(t *testing.T) {
	m := moonAt((2448724.5 - J2000JulianDay) / 36525)
	for _, c := range []struct {
		name           string
		got, want, tol float64
	}{
		{"longitude", m.lambdaDeg, 133.162655, 5e-6},
		{"latitude", m.betaDeg, -3.229126, 1.5e-3}, // the terms left out
		{"distance", m.distanceKm, 368409.7, 0.1},
	} {
		if math.Abs(c.got-c.want) > c.tol {
			t.Errorf("%s: got %.6f, want %v ± %v", c.name, c.got, c.want, c.tol)
		}
	}
}

// maximum returns the greatest obscured fraction of a day and its second.
func maximum(e *Eclipse) (fraction, magnitude, second float64) {
	for s := 0.0; s <= 86400; s += 5 {
		if m := e.Magnitude(s); m > magnitude {
			magnitude, second, fraction = m, s, e.ObscuredFraction(s)
		}
	}
	return fraction, magnitude, second
}

func eclipseAt(day int64, site Site) (Day, Eclipse) {
	d := NewDay(day, site)
	return d, NewEclipse(&d, site)
}

// Circumstances as published in the eclipse bulletins of NASA (Espenak), from memory: greatest
// eclipse of each, with the point on Earth given to a minute of arc or better.
func TestPublishedEclipses(t *testing.T) {
	clock := func(h, m, s int) float64 { return float64(h*3600 + m*60 + s) }
	for _, c := range []struct {
		name              string
		day               int64
		site              Site
		maxSecond         float64
		toleranceSeconds  float64
		fraction, tol     float64
		durationSeconds   float64 // of totality; 0 where none
		durationTolerance float64
	}{
		{"2017-08-21 greatest eclipse, Kentucky", unixDay(2017, 8, 21), Site{36.9667, -87.6717, 150}, clock(18, 25, 32), 40, 1, 0, 160, 12},
		{"2024-04-08 greatest eclipse, Durango", unixDay(2024, 4, 8), Site{25.29, -104.14, 1900}, clock(18, 17, 18), 40, 1, 0, 268, 12},
		{"1999-08-11 greatest eclipse, Romania", unixDay(1999, 8, 11), Site{45.08, 24.29, 300}, clock(11, 3, 7), 40, 1, 0, 143, 12},
		{"2015-03-20 partial, Zealand", unixDay(2015, 3, 20), Site{55.79064, 12.52505, 50}, clock(9, 49, 0), 180, 0.80, 0.02, 0, 0},
	} {
		_, e := eclipseAt(c.day, c.site)
		if !e.Possible() {
			t.Errorf("%s: not seen", c.name)
			continue
		}
		fraction, magnitude, second := maximum(&e)
		if math.Abs(fraction-c.fraction) > c.tol || math.Abs(second-c.maxSecond) > c.toleranceSeconds {
			t.Errorf("%s: fraction %.4f at %v s, want %v at %v s", c.name, fraction, second, c.fraction, c.maxSecond)
		}
		total := 0.0
		for s := 0.0; s < 86400; s++ {
			if e.ObscuredFraction(s) == 1 {
				total++
			}
		}
		if math.Abs(total-c.durationSeconds) > c.durationTolerance {
			t.Errorf("%s: totality lasts %v s, want %v", c.name, total, c.durationSeconds)
		}
		t.Logf("%s: fraction %.4f magnitude %.4f, %+.0f s of the published time, totality %v s", c.name, fraction, magnitude, second-c.maxSecond, total)
	}
}

// Days of new moon without an eclipse anywhere, ordinary days, and an eclipse of the other
// hemisphere (2017-08-21 seen from Denmark at noon: nothing).
func TestNoEclipse(t *testing.T) {
	zealand := Site{55.79064, 12.52505, 50}
	for _, c := range []struct {
		day  int64
		site Site
	}{
		{unixDay(2015, 4, 18), zealand}, {unixDay(2016, 5, 6), zealand}, {unixDay(2024, 10, 3), zealand}, {unixDay(2026, 6, 21), zealand},
		{unixDay(2015, 3, 19), zealand}, {unixDay(2015, 3, 21), zealand}, {unixDay(2026, 6, 15), zealand},
	} {
		_, e := eclipseAt(c.day, c.site)
		if f, _, _ := maximum(&e); f != 0 {
			t.Errorf("day %d: %v of the sun hidden", c.day, f)
		}
	}
	// Eclipses can touch the Earth on 2 to 5 days a year (224 solar eclipses from 2001 to 2100, catalogue
	// of Espenak and Meeus, from memory); a day is called possible a little more often.
	days, possible := 0, 0
	for day := unixDay(2001, 1, 1); day <= unixDay(2100, 12, 31); day += 1 {
		d := Day{day: day, deltaTSeconds: 69.184}
		days++
		if e := NewEclipse(&d, zealand); e.Possible() {
			possible++
		}
	}
	t.Logf("%d of %d days possible", possible, days)
	if possible < 224 || possible > 450 {
		t.Errorf("%d possible days in a century that has 224 eclipses", possible)
	}
}

func TestOverlapProperties(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		rs := rapid.Float64Range(0.004, 0.005).Draw(t, "rs")
		rm := rapid.Float64Range(0.004, 0.005).Draw(t, "rm")
		d := rapid.Float64Range(0, 0.011).Draw(t, "d")
		f, closer := overlapFraction(d, rs, rm), overlapFraction(d*0.99, rs, rm)
		if !(f >= 0 && f <= 1) || closer < f-1e-12 {
			t.Fatalf("fraction %v, nearer %v", f, closer)
		}
	})
	// Two equal circles at a distance of one radius share 2/3 - sqrt(3)/(2 pi) = 0.391002 of their area.
	if f := overlapFraction(1, 1, 1); math.Abs(f-0.3910022189557706) > 1e-14 {
		t.Errorf("equal circles: %v", f)
	}
	if f := overlapFraction(0.01, 1, 0.5); f != 0.25 {
		t.Errorf("annular: %v", f)
	}
}

// A measured eclipse: minutes of direct normal irradiance at a Danish station on 2015-03-20 follow
// the visible part of the disc, where the sky was clear enough to see the sun.
func TestMeasuredEclipse(t *testing.T) {
	f, err := os.Open("../../../shared/data/lyngby_2015/2015_03.csv.gz")
	if err != nil {
		t.Skip("the measured month of the 2015 eclipse is not on this machine: ", err)
	}
	defer func() { _ = f.Close() }()
	z, err := gzip.NewReader(f)
	if err != nil {
		t.Fatal(err)
	}
	records, err := csv.NewReader(z).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	_, e := eclipseAt(unixDay(2015, 3, 20), Site{55.79064, 12.52505, 50})
	lowest, lowestSecond := math.Inf(1), 0.0
	for _, r := range records[1:] {
		at, err := time.Parse("2006-01-02 15:04:05", r[0][:19])
		if err != nil {
			t.Fatal(err)
		}
		if at.Year() != 2015 || at.YearDay() != 79 || at.Hour() < 9 || at.Hour() > 10 {
			continue
		}
		global, err := strconv.ParseFloat(r[1], 64)
		if err != nil {
			continue
		}
		if global < lowest {
			lowest, lowestSecond = global, float64(at.Hour()*3600+at.Minute()*60+30)
		}
	}
	fraction, _, second := maximum(&e)
	t.Logf("global lowest, %v W/m2, at %v s; obscured most, %.3f, at %v s", lowest, lowestSecond, fraction, second)
	if math.Abs(lowestSecond-second) > 6*60 {
		t.Errorf("global is lowest at %v s, the eclipse greatest at %v s", lowestSecond, second)
	}
}

func BenchmarkNewEclipseOrdinaryDay(b *testing.B) {
	d := NewDay(unixDay(2026, 6, 21), exampleSite)
	for range b.N {
		e := NewEclipse(&d, exampleSite)
		if e.Possible() {
			b.Fatal("eclipse")
		}
	}
}

func BenchmarkObscuredFraction(b *testing.B) {
	_, e := eclipseAt(unixDay(2017, 8, 21), exampleSite)
	for i := range b.N {
		benchSink += e.ObscuredFraction(float64(i % 86400))
	}
}
