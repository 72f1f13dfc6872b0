package sensor

import (
	"compress/gzip"
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

type check struct {
	name           string
	got, want, tol float64
}

func verify(t *testing.T, checks []check) {
	t.Helper()
	for _, c := range checks {
		if !(math.Abs(c.got-c.want) <= c.tol) {
			t.Errorf("%s: got %.9g, want %v ± %g", c.name, c.got, c.want, c.tol)
		}
	}
}

// sigma T^4, CODATA, recomputed.
func TestBlackbody(t *testing.T) {
	for _, c := range []struct{ t, want float64 }{
		{250, 221.499001}, {260, 259.122502}, {273.15, 315.657822}, {288.15, 390.918508}, {298.15, 448.075287}, {300, 459.300328}, {320, 594.581853},
	} {
		verify(t, []check{{"flux", BlackbodyFlux(c.t), c.want, 1e-6}, {"temperature", BlackbodyTemperature(c.want), c.t, 1e-6}})
	}
	if !math.IsNaN(BlackbodyFlux(-1)) || !math.IsNaN(BlackbodyTemperature(-1)) {
		t.Error("a negative argument is taken")
	}
}

// Worked values recomputed from the published equations.
func TestPyrgeometerEquations(t *testing.T) {
	net := NetExchange(-400, 4)
	p := Philipona{K1: 0.06, K2: 0.998, K3: 2.9}
	verify(t, []check{
		{"net", net, -100, 0},
		{"simple", PyrgeometerSimple(net, 288.15), 290.9185, 6e-5},
		{"Albrecht and Cox, equal temperatures", PyrgeometerAlbrechtCox(net, 288.15, 288.15, 4), 290.9185, 6e-5},
		{"Albrecht and Cox, cold dome", PyrgeometerAlbrechtCox(net, 288.15, 287.65, 4), 301.7435, 6e-5},
		{"dome term", PyrgeometerAlbrechtCox(net, 288.15, 287.65, 4) - PyrgeometerSimple(net, 288.15), 10.8250, 6e-5},
		{"Philipona, equal temperatures", p.Flux(net, 288.15, 288.15), 281.9968, 6e-5},
		{"Philipona, cold dome", p.Flux(net, 288.15, 287.65), 289.8449, 6e-5},
		// A dome one kelvin warm, recomputed (the trade prints "about 18 W m-2 per K"), and the slope.
		{"dome 1 K warm, k 3.5", PyrgeometerAlbrechtCox(0, 288.15, 288.15, 3.5) - PyrgeometerAlbrechtCox(0, 288.15, 289.15, 3.5), 19.09, 6e-3},
		{"dome 1 K warm, k 4", PyrgeometerAlbrechtCox(0, 288.15, 288.15, 4) - PyrgeometerAlbrechtCox(0, 288.15, 289.15, 4), 21.82, 6e-3},
		{"slope", DomeErrorPerKelvin(4, 288.15), PyrgeometerAlbrechtCox(0, 288.15, 287.65, 4) - PyrgeometerAlbrechtCox(0, 288.15, 288.65, 4), 1e-3},
	})
	for _, bad := range []float64{PyrgeometerSimple(0, 100), PyrgeometerSimple(0, 18.4), PyrgeometerAlbrechtCox(0, 288, 15, 4),
		p.Flux(0, 400, 288), NetExchange(1, 0), NetExchange(1, -4)} {
		if !math.IsNaN(bad) {
			t.Errorf("a value outside the range gives %v", bad)
		}
	}
}

func TestPyrgeometerProperties(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		net := rapid.Float64Range(-250, 30).Draw(t, "net")
		body := rapid.Float64Range(200, 330).Draw(t, "body")
		dome := body + rapid.Float64Range(-3, 3).Draw(t, "dome-body")
		k := rapid.Float64Range(2.5, 4.5).Draw(t, "k")
		a := PyrgeometerAlbrechtCox(net, body, dome, k)
		if b := (Philipona{0, 1, k}).Flux(net, body, dome); math.Abs(a-b) > 1e-9 {
			t.Fatalf("Philipona does not reduce to Albrecht and Cox: %v %v", a, b)
		}
		if b := (ThreeCoefficient{0.25, 1, -k}).Flux(net/0.25, body, dome); math.Abs(a-b) > 1e-9 {
			t.Fatalf("the certificate's form differs: %v %v", a, b)
		}
		if (dome < body) != (a > PyrgeometerSimple(net, body)) && math.Abs(dome-body) > 1e-6 {
			t.Fatalf("a cold dome must raise the result")
		}
	})
}

// Nominal R-T table of the 10 kohm part against the curve, recomputed.
func TestThermistor(t *testing.T) {
	for _, c := range []struct{ ohm, wantC float64 }{
		{239800, -40.0185}, {78910, -20.0122}, {29490, -0.0157}, {12490, 19.5512}, {10000, 24.9834}, {3893, 49.9817}, {7882, 30.98},
	} {
		tol := 6e-5
		if c.ohm == 7882 {
			tol = 0.006 // two decimals given
		}
		verify(t, []check{{strconv.Itoa(int(c.ohm)), Thermistor10k.TemperatureK(c.ohm) - ZeroCelsiusK, c.wantC, tol}})
	}
	for _, c := range []struct{ c, wantOhm float64 }{{-40, 239537.25}, {0, 29468.59}, {20, 12259.56}, {25, 9993.32}, {40, 5589.81}} {
		verify(t, []check{{"inverse", Thermistor10k.ResistanceOhm(c.c + ZeroCelsiusK), c.wantOhm, 6e-3}})
	}
	for _, ohm := range []float64{0, -5, math.Inf(1), math.NaN(), 1e-3, 1e12} {
		if got := Thermistor10k.TemperatureK(ohm); !math.IsNaN(got) {
			t.Errorf("%v ohm gives %v K", ohm, got)
		}
	}
	rapid.Check(t, func(t *rapid.T) {
		k := rapid.Float64Range(190, 400).Draw(t, "K")
		if got := Thermistor10k.TemperatureK(Thermistor10k.ResistanceOhm(k)); math.Abs(got-k) > 1e-9 {
			t.Fatalf("%v K comes back as %v", k, got)
		}
	})
	if _, ok := ThermistorCurve("nonesuch"); ok {
		t.Error("an unknown curve is found")
	}
}

// IEC 60751 table values, recomputed; 100 C is printed in the standard as 138.51.
func TestPlatinum(t *testing.T) {
	for _, c := range []struct{ c, ohm float64 }{
		{-200, 18.5201}, {-100, 60.2558}, {-50, 80.3063}, {-40, 84.2707}, {-20, 92.1599}, {-10, 96.0859}, {0, 100}, {10, 103.9025},
		{20, 107.7935}, {25, 109.7347}, {40, 115.5408}, {50, 119.3971}, {100, 138.5055},
	} {
		verify(t, []check{{"ohm", PlatinumOhm(c.c, 100), c.ohm, 6e-5}, {"C", PlatinumC(c.ohm, 100), c.c, 2e-4}, {"Pt1000", PlatinumOhm(c.c, 1000), 10 * c.ohm, 6e-4}})
	}
	for _, ohm := range []float64{0, 18, 391, math.NaN(), math.Inf(1), -1} {
		if got := PlatinumC(ohm, 100); !math.IsNaN(got) {
			t.Errorf("%v ohm gives %v C", ohm, got)
		}
	}
	if !math.IsNaN(PlatinumOhm(-201, 100)) || !math.IsNaN(PlatinumOhm(851, 100)) || !math.IsNaN(PlatinumC(100, 0)) {
		t.Error("a value outside the range is taken")
	}
	rapid.Check(t, func(t *rapid.T) {
		c := rapid.Float64Range(-200, 850).Draw(t, "C")
		if got := PlatinumC(PlatinumOhm(c, 100), 100); math.Abs(got-c) > 1e-9 {
			t.Fatalf("%v C comes back as %v", c, got)
		}
	})
}

func TestRadiometer(t *testing.T) {
	plain := Radiometer{SensitivityUVPerWm2: 10}
	warm := Radiometer{SensitivityUVPerWm2: 8.62, ZeroOffsetWm2: -2, Response: TemperatureResponse{20, [3]float64{-2e-4, -1e-5, 0}}}
	verify(t, []check{
		{"full scale of 1500 W m-2 is 15 mV", plain.Irradiance(15, math.NaN()), 1500, 1e-9},
		{"zero offset", warm.Irradiance(0, 20), 2, 1e-12},
		{"temperature response", warm.Irradiance(8.62, 40), 1000/(1-0.004-0.004) + 2, 1e-9},
		{"round trip", warm.Irradiance(warm.VoltageMV(731.5, -12), -12), 731.5, 1e-9},
		// ASTM G213 worked value, recomputed.
		{"net infrared", NetInfraredCorrection(8000, 8, 0.04, -150), 1000.75, 1e-9},
	})
	for _, bad := range []float64{Radiometer{}.Irradiance(1, 20), Radiometer{SensitivityUVPerWm2: -9}.Irradiance(1, 20),
		Radiometer{SensitivityUVPerWm2: 9, Response: TemperatureResponse{20, [3]float64{0.5}}}.Irradiance(1, 40)} {
		if !math.IsNaN(bad) {
			t.Errorf("a value outside the range gives %v", bad)
		}
	}
	for _, s := range []float64{0.0086, 8620, 0, math.NaN(), -8} {
		if !SensitivityLooksLikeUnitSlip(s) {
			t.Errorf("%v passes as a sensitivity", s)
		}
	}
	if SensitivityLooksLikeUnitSlip(8.62) {
		t.Error("8.62 is refused")
	}
}

func TestThermalOffset(t *testing.T) {
	// An offset of known coefficients is found again, with noise that sums to nothing.
	var y, net, dome []float64
	for i := range 600 {
		n := -150 + 140*math.Abs(math.Sin(float64(i)*0.01))
		d := -3 + 2*math.Cos(float64(i)*0.37)
		y = append(y, -0.4+0.067*n+0.3*d+0.5*math.Sin(float64(i)*2.1))
		net, dome = append(net, n), append(dome, d)
	}
	y[17], net[33] = math.NaN(), math.Inf(-1)
	f, err := FitThermalOffset(y, net, dome)
	if err != nil {
		t.Fatal(err)
	}
	verify(t, []check{{"B0", f.B0, -0.4, 0.1}, {"B1", f.B1, 0.067, 1e-3}, {"B2", f.B2, 0.3, 0.03}, {"sd", f.ResidualSDWm2, 0.5 / math.Sqrt2, 0.01},
		{"minutes", float64(f.Minutes), 598, 0}, {"corrected", f.Correct(40, -150, 0), 40 - f.B0 + 150*f.B1, 1e-12}})
	if !f.Plausible() {
		t.Error("a common offset is not plausible")
	}
	two, err := FitThermalOffset(y, net, nil)
	if err != nil || two.B2 != 0 || math.Abs(two.B1-0.067) > 5e-3 {
		t.Errorf("without dome: %+v %v", two, err)
	}
	// A dome term that is a multiple of net infrared cannot be told apart: the two-term fit is given.
	same := make([]float64, len(net))
	for i := range net {
		same[i] = 0.02 * net[i]
	}
	if got, err := FitThermalOffset(y, net, same); err != nil || got.B2 != 0 || math.Abs(got.B1-two.B1) > 1e-6 {
		t.Errorf("collinear: %+v %v", got, err)
	}
	for name, run := range map[string]func() error{
		"too few minutes": func() error { _, err := FitThermalOffset(y[:100], net[:100], nil); return err },
		"lengths":         func() error { _, err := FitThermalOffset(y, net[:10], nil); return err },
		"no spread":       func() error { _, err := FitThermalOffset(y, make([]float64, len(y)), nil); return err },
	} {
		if err := run(); err == nil || !strings.HasPrefix(err.Error(), "thermal offset: ") {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// Two station-days of a US observatory with net signal, case and dome temperatures: the published
// coefficients must rebuild the station's own flux. The instrument's temperatures change quickly on the
// second day, and were read once a minute.
func TestMeasuredPyrgeometerDays(t *testing.T) {
	for _, day := range []struct {
		file                    string
		down, up                ThreeCoefficient
		sdMaxWm2, meanAbsMaxWm2 float64
		upSDMaxWm2              float64 // 0 where the day has no upward data
	}{
		{"plains_2019-01-01.csv.gz", ThreeCoefficient{0.24775, 1.0079, -2.30}, ThreeCoefficient{0.25537, 1.0079, -2.77}, 0.06, 0.1, 0.1},
		{"plains_2019-07-05.csv.gz", ThreeCoefficient{0.25065, 1.0034, -3.50}, ThreeCoefficient{}, 0.35, 0.2, 0},
	} {
		t.Run(day.file, func(t *testing.T) {
			columns := readColumns(t, "../../../shared/data/pyrgeometer/"+day.file)
			rebuild(t, columns, "down", day.down, day.sdMaxWm2, day.meanAbsMaxWm2)
			if day.upSDMaxWm2 > 0 {
				rebuild(t, columns, "up", day.up, day.upSDMaxWm2, day.meanAbsMaxWm2)
			}
		})
	}
}

func readColumns(t *testing.T, path string) map[string][]float64 {
	t.Helper()
	f, err := os.Open(path)
	if err != nil {
		t.Skip("the measured pyrgeometer days are not on this machine: ", err)
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
	columns := map[string][]float64{}
	for _, r := range records[1:] {
		for i, name := range records[0] {
			v, err := strconv.ParseFloat(r[i], 64)
			if err != nil {
				v = math.NaN()
			}
			columns[name] = append(columns[name], v)
		}
	}
	return columns
}

// rebuild compares the flux of the published coefficients with the station's own.
func rebuild(t *testing.T, columns map[string][]float64, side string, c ThreeCoefficient, sdMax, meanMax float64) {
	t.Helper()
	var n int
	var sum, sum2 float64
	for i, flux := range columns["lw_"+side] {
		d := c.FluxFromNet(columns["lw_"+side+"_net"][i], columns["lw_"+side+"_case_k"][i], columns["lw_"+side+"_dome_k"][i]) - flux
		if math.IsNaN(d) {
			continue
		}
		n++
		sum += d
		sum2 += d * d
	}
	if n < 1000 {
		t.Fatalf("%s: %d minutes only", side, n)
	}
	mean := sum / float64(n)
	sd := math.Sqrt(sum2/float64(n) - mean*mean)
	t.Logf("%s: %d minutes, mean difference %.4f W/m2, sd %.4f", side, n, mean, sd)
	if sd > sdMax || math.Abs(mean) > meanMax {
		t.Errorf("%s: rebuilt flux differs by %.3f ± %.3f W/m2, allowed ±%v ± %v", side, mean, sd, meanMax, sdMax)
	}
}

// Fractions of the black body, recomputed from the series; 5772 K is the nominal sun of the IAU (2015).
func TestPlanckFraction(t *testing.T) {
	for _, c := range []struct{ um, k, want, tol float64 }{
		{0.28, 5778, .021147, 1e-6}, {0.315, 5778, .041750, 1e-6}, {0.4, 5778, .122245, 1e-6}, {0.7, 5778, .488905, 1e-6}, {0.8, 5778, .582537, 1e-6},
		{1, 5778, .718102, 1e-6}, {2.8, 5778, .974523, 1e-6}, {3, 5778, .978780, 1e-6}, {4, 5778, .990269, 1e-6}, {0.4, 5772, .121770, 1e-6},
		{0.7, 5772, .488153, 1e-6}, {3, 5772, .978722, 1e-6}, {3, 288.15, 5.0e-5, 1e-6}, {4, 288.15, .001456, 1e-6}, {4.5, 288.15, .004225, 1e-6},
		{50, 288.15, .965505, 1e-6}, {100, 288.15, .994727, 1e-6}, {3.5, 300, .000556, 1e-6}, {42, 300, .951393, 1e-6},
	} {
		verify(t, []check{{"fraction", PlanckFraction(c.um, c.k), c.want, c.tol}})
	}
	verify(t, []check{
		{"8 to 14 um at 300 K", PlanckFraction(14, 300) - PlanckFraction(8, 300), .375743, 1e-6},
		{"both ways to the series' end", PlanckFraction(14387.768775/0.0100001, 1), PlanckFraction(14387.768775/0.0099999, 1), 1e-9},
	})
	if !math.IsNaN(PlanckFraction(0, 300)) || !math.IsNaN(PlanckFraction(1, math.NaN())) {
		t.Error("a value outside the range is taken")
	}
}
