package sky

import (
	"compress/gzip"
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"strings"
	"testing"
	"time"

	"fluxwarden/qc/sun"
)

// Recomputed from the paper's definitions.
func TestWindowStatistics(t *testing.T) {
	ramp := make([]float64, 10)
	for i := range ramp {
		ramp[i] = float64(2 * i)
	}
	zigzag := []float64{100, 110, 95, 120, 100, 130, 105, 115, 100, 118}
	verify(t, []check{
		{"ramp", LineLength(ramp, 1), 20.124612, 1e-6},
		{"zig-zag", LineLength(zigzag, 1), 168.275731, 1e-6},
		{"slopes", SlopeDeviation(zigzag, 1), 0.191039, 1e-6},
		{"straight line", SlopeDeviation(ramp, 1), 0, 1e-15},
	})
	if !math.IsNaN(SlopeDeviation(zigzag[:2], 1)) {
		t.Error("two values have one slope and no deviation")
	}
}

// modelDay is a cloudless June day at 55 N, with the sun of qc/sun and the sky of Bird.
func modelDay(t *testing.T) (ClearDay, []float64) {
	t.Helper()
	const n = 1440
	d := sun.NewDay(20625, sun.Site{LatitudeDeg: 55.8, LongitudeDeg: 12.5, ElevationM: 50})
	day := ClearDay{GlobalWm2: make([]float64, n), DiffuseWm2: make([]float64, n), CosZenith: make([]float64, n),
		ExtraterrestrialWm2: sun.ExtraterrestrialNormal(0, d.DistanceAU())}
	for i := range n {
		p := d.AtMinute(float64(60*i + 30))
		day.CosZenith[i] = p.CosZenith
		r, ok := Bird(BirdInput{ZenithDeg: p.ZenithDeg, ExtraterrestrialWm2: day.ExtraterrestrialWm2, PressureHPa: 1010, OzoneCm: 0.33, WaterCm: 1.4,
			AOD380: 0.12, AOD500: 0.08, Albedo: 0.2})
		if !ok {
			continue
		}
		day.GlobalWm2[i], day.DiffuseWm2[i] = r.GlobalWm2, r.DiffuseWm2
	}
	return day, append([]float64(nil), day.GlobalWm2...)
}

func TestClearDayIsFound(t *testing.T) {
	day, model := modelDay(t)
	clear := make([]bool, len(model))
	fit, err := LongAckermanDefaults().Fit(day, clear)
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("Long and Ackerman: %+v", fit)
	if fit.Minutes < 600 || !within(fit.GlobalB, 1.05, 1.35) || !within(fit.GlobalA, 1000, 1150) {
		t.Errorf("fit %+v", fit)
	}
	for i, ok := range clear {
		// A power of the cosine follows the model within 2 per cent, 5 below 25 degrees of height.
		tolerance := 0.02
		if day.CosZenith[i] < 0.42 {
			tolerance = 0.05
		}
		if ok && math.Abs(fit.GlobalAt(day.CosZenith[i])/day.GlobalWm2[i]-1) > tolerance {
			t.Fatalf("minute %d: fit %v, day %v", i, fit.GlobalAt(day.CosZenith[i]), day.GlobalWm2[i])
		}
	}
	scaled := make([]float64, len(model))
	for i := range model {
		scaled[i] = model[i] / 0.97
	}
	alpha, count := RenoHansenDefaults().Clear(day.GlobalWm2, scaled, clear)
	if math.Abs(alpha-0.97) > 1e-4 || count < 800 {
		t.Errorf("Reno and Hansen: alpha %v, %d clear samples", alpha, count)
	}
}

// A cloud of an hour, missing minutes and a broken sky are not clear, and do not spoil the rest.
func TestCloudsAreNotClear(t *testing.T) {
	day, model := modelDay(t)
	for i := 600; i < 660; i++ {
		day.GlobalWm2[i] *= 0.3
		day.DiffuseWm2[i] = day.GlobalWm2[i]
	}
	for i := 700; i < 705; i++ {
		day.GlobalWm2[i] = math.NaN()
	}
	for i := 800; i < 900; i++ {
		day.GlobalWm2[i] *= 0.75 + 0.35*math.Mod(float64(i)*0.618, 1)
	}
	clear := make([]bool, len(model))
	la := LongAckermanDefaults()
	if n := la.Clear(day, clear); n < 300 {
		t.Errorf("%d clear minutes beside the clouds", n)
	}
	inspect := func(name string) {
		for i, ok := range clear {
			cloudy := (i >= 600 && i < 660) || (i >= 700 && i < 705) || (i >= 800 && i < 900) || day.CosZenith[i] < 0
			if ok && cloudy {
				t.Errorf("%s: minute %d is called clear", name, i)
			}
		}
	}
	inspect("Long and Ackerman")
	if _, n := RenoHansenDefaults().Clear(day.GlobalWm2, model, clear); n < 500 {
		t.Errorf("%d clear samples beside the clouds", n)
	}
	inspect("Reno and Hansen")

	for i := range day.GlobalWm2 {
		day.GlobalWm2[i] = math.NaN()
	}
	if _, err := la.Fit(day, clear); err == nil || !strings.HasPrefix(err.Error(), "clear sky: 0 clear minutes") {
		t.Errorf("an empty day is fitted: %v", err)
	}
	if alpha, n := RenoHansenDefaults().Clear(day.GlobalWm2, model, clear); alpha != 1 || n != 0 {
		t.Errorf("an empty day: %v %d", alpha, n)
	}
}

func TestJordanHansen(t *testing.T) {
	for _, step := range []int{1, 5, 15, 30} {
		if rh, ok := JordanHansen(step); !ok || rh.WindowSamples < 3 {
			t.Errorf("step %d: %+v %v", step, rh, ok)
		}
	}
	if _, ok := JordanHansen(7); ok {
		t.Error("a step of 7 minutes is taken")
	}
}

// Days that a Danish station's record shows as clear, and the day of an eclipse, by the fit of Long and Ackerman.
func TestMeasuredClearDays(t *testing.T) {
	const path = "../../../shared/data/lyngby/2016_05.csv.gz"
	f, err := os.Open(path)
	if err != nil {
		t.Skip("the measured month of May 2016 is not on this machine: ", err)
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
	days := map[int]*ClearDay{}
	site := sun.Site{LatitudeDeg: 55.79064, LongitudeDeg: 12.52505, ElevationM: 50}
	for _, r := range records[1:] {
		at, err := time.Parse("2006-01-02 15:04:05", r[0][:19])
		if err != nil {
			t.Fatal(err)
		}
		d := days[at.Day()]
		if d == nil {
			s := sun.NewDay(at.Unix()/86400, site)
			d = &ClearDay{CosZenith: make([]float64, 1440), ExtraterrestrialWm2: sun.ExtraterrestrialNormal(0, s.DistanceAU())}
			s.Fill(nil, nil, d.CosZenith, 0, 30)
			for range 1440 {
				d.GlobalWm2, d.DiffuseWm2 = append(d.GlobalWm2, math.NaN()), append(d.DiffuseWm2, math.NaN())
			}
			days[at.Day()] = d
		}
		minute := at.Hour()*60 + at.Minute()
		if v, err := strconv.ParseFloat(r[1], 64); err == nil {
			d.GlobalWm2[minute] = v
		}
		if v, err := strconv.ParseFloat(r[3], 64); err == nil {
			d.DiffuseWm2[minute] = v
		}
	}
	clear := make([]bool, 1440)
	for _, day := range []int{5, 6, 8, 9, 12} {
		fit, err := LongAckermanDefaults().Fit(*days[day], clear)
		if err != nil {
			t.Errorf("2016-05-%02d, a clear day: %v", day, err)
			continue
		}
		t.Logf("2016-05-%02d: %+v", day, fit)
		if !within(fit.GlobalA, 950, 1250) || !within(fit.GlobalB, 1.0, 1.4) {
			t.Errorf("2016-05-%02d: fit %+v", day, fit)
		}
	}
}
