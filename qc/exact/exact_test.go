package exact

import (
	"bufio"
	"flag"
	"fmt"
	"math"
	"os"
	"strconv"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

var update = flag.Bool("update", false, "write testdata/golden_bits.txt anew (only with a raise of judge_version)")

// ulps is the distance of a and b in units of the last place; NaN equals NaN, and
// zeros must agree in sign.
func ulps(a, b float64) float64 {
	if math.IsNaN(a) || math.IsNaN(b) {
		if math.IsNaN(a) && math.IsNaN(b) {
			return 0
		}
		return math.Inf(1)
	}
	if math.Signbit(a) != math.Signbit(b) {
		return math.Inf(1)
	}
	d := int64(math.Float64bits(a)) - int64(math.Float64bits(b))
	return math.Abs(float64(d))
}

type function struct {
	name      string
	mine, std func(float64) float64
	lo, hi    float64
	tolerance float64 // ulp against math, which itself errs by up to one
}

var functions = []function{
	{"Exp", Exp, math.Exp, -745, 709.3, 2},
	{"Log", Log, math.Log, 0, 1e6, 1},
	{"Sin", Sin, math.Sin, -1e4, 1e4, 2},
	{"Cos", Cos, math.Cos, -1e4, 1e4, 2},
	{"Tan", Tan, math.Tan, -30, 30, 3},
	{"Asin", Asin, math.Asin, -0.9, 0.9, 3},
	{"Acos", Acos, math.Acos, -0.9, 0.9, 4},
	{"Atan", Atan, math.Atan, -100, 100, 2},
}

func TestAgainstMath(t *testing.T) {
	for _, f := range functions {
		t.Run(f.name, func(t *testing.T) {
			worst, at := 0.0, 0.0
			const n = 200_000
			for i := range n {
				x := f.lo + (f.hi-f.lo)*(float64(i)+0.382)/n
				want := f.std(x)
				// Near its zeros math's reduction of the angle is good to absolute, not
				// relative precision: see TestReferenceDigits.
				if math.Abs(want) < 1e-3 {
					continue
				}
				if d := ulps(f.mine(x), want); d > worst {
					worst, at = d, x
				}
			}
			t.Logf("worst %v ulp at %v", worst, at)
			if worst > f.tolerance {
				t.Errorf("%s(%v) = %v, math gives %v: %v ulp apart, allowed %v", f.name, at, f.mine(at), f.std(at), worst, f.tolerance)
			}
		})
	}
}

func TestPowAgainstMath(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		x := rapid.Float64Range(1e-12, 1e6).Draw(t, "x")
		y := rapid.Float64Range(-40, 40).Draw(t, "y")
		got, want := Pow(x, y), math.Pow(x, y)
		// math.Pow multiplies log x by y in one double, so its own error grows with |y log x|; and it squares x again and again for
		// the whole part of y, so it grows with |y| as well.
		tolerance := 4 + math.Abs(y*math.Log(x)) + math.Abs(y)
		if want > 1e-300 && want < 1e300 && ulps(got, want) > tolerance {
			t.Fatalf("Pow(%v, %v) = %v, math %v, %v ulp", x, y, got, want, ulps(got, want))
		}
	})
}

// Whole powers of short numbers are exact in binary or known to the last digit.
func TestPowExactCases(t *testing.T) {
	for n := -300; n <= 300; n++ {
		if got, want := Pow(2, float64(n)), math.Ldexp(1, n); got != want {
			t.Errorf("Pow(2, %d) = %v, want %v", n, got, want)
		}
	}
	for base := 2.0; base <= 12; base++ {
		exactPower := 1.0
		for n := 1; exactPower*base < 1<<53; n++ {
			exactPower *= base
			if got := Pow(base, float64(n)); got != exactPower {
				t.Errorf("Pow(%v, %d) = %v, want %v", base, n, got, exactPower)
			}
			if got := Pow(-base, float64(n)); math.Abs(got) != exactPower || (got < 0) != (n%2 == 1) {
				t.Errorf("Pow(%v, %d) = %v", -base, n, got)
			}
		}
	}
}

func TestSpecialValues(t *testing.T) {
	inf, nan := math.Inf(1), math.NaN()
	points := []float64{0, math.Copysign(0, -1), 1, -1, 0.5, -0.5, 2, -2, 3, -3, 1.5, -1.5, inf, -inf, nan,
		math.MaxFloat64, -math.MaxFloat64, math.SmallestNonzeroFloat64, -math.SmallestNonzeroFloat64, 0x1p-1022, 0x1p-1030,
		709.7827, 709.79, -745.13, -745.2, -708.5, 1e-300, 1e300, 1 << 31, 1 << 53, -(1 << 53), 1<<53 - 1, 1 + 0x1p-52, 1 - 0x1p-53}
	for _, f := range functions {
		for _, x := range points {
			if math.Abs(x) > 1e15 && !math.IsInf(x, 0) && (f.name == "Sin" || f.name == "Cos" || f.name == "Tan") {
				continue // TestHugeAngles
			}
			if f.name == "Exp" && x > 709.4 && x < 710 || f.name == "Log" && x > 0 && x < 0x1p-1022 {
				continue // math's assembly errs here; TestReferenceDigits has the true values
			}
			if d := ulps(f.mine(x), f.std(x)); d > 2 {
				t.Errorf("%s(%v) = %v, math gives %v", f.name, x, f.mine(x), f.std(x))
			}
		}
	}
	for _, x := range points {
		for _, y := range points {
			// Where y/x underflows to zero math.Atan2 loses the sign of y.
			if d := ulps(Atan2(y, x), math.Atan2(y, x)); d > 2 && y/x != 0 {
				t.Errorf("Atan2(%v, %v) = %v, math gives %v", y, x, Atan2(y, x), math.Atan2(y, x))
			}
			got, want := Pow(x, y), math.Pow(x, y)
			if math.Abs(y) > 1<<32 && math.Abs(math.Abs(x)-1) < 1e-10 && x != 1 && x != -1 {
				continue // math.Pow keeps eight digits here; TestReferenceDigits has the true values
			}
			if d := ulps(got, want); d > 2048 && !(math.Abs(want) < 0x1p-1020 && math.Abs(got-want) < 0x1p-1073) {
				t.Errorf("Pow(%v, %v) = %v, math gives %v", x, y, got, want)
			}
		}
	}
}

// Digits of mathematical tables, rounded to double; from memory of the constants, to 20
// digits (Abramowitz and Stegun 1964, tables 1.1 and 4.x).
func TestReferenceDigits(t *testing.T) {
	cases := []struct {
		name      string
		got, want float64
	}{
		{"e", Exp(1), 2.71828182845904523536},
		{"1/e", Exp(-1), 0.36787944117144232160},
		{"e^10", Exp(10), 22026.465794806716517},
		{"ln 2", Log(2), 0.69314718055994530942},
		{"ln 10", Log(10), 2.30258509299404568402},
		{"ln 3", Log(3), 1.09861228866810969140},
		{"sqrt 2", Pow(2, 0.5), 1.41421356237309504880},
		{"2^(1/3)", Pow(2, 1.0/3), 1.25992104989487316477},
		{"pi/6", Asin(0.5), 0.52359877559829887308},
		{"pi/3", Acos(0.5), 1.04719755119659774615},
		{"pi/4", Atan(1), 0.78539816339744830962},
		{"sin 1", Sin(1), 0.84147098480789650665},
		{"cos 1", Cos(1), 0.54030230586813971740},
		{"tan 1", Tan(1), 1.55740772465490223051},
		{"sin 2", Sin(2), 0.90929742682568169540},
		{"cos 10", Cos(10), -0.83907152907645245226},
		// The double nearest pi is 1.2246467991473532e-16 below pi.
		{"sin(float64(pi))", Sin(math.Pi), 1.2246467991473531772e-16},
		{"cos(float64(pi/2))", Cos(math.Pi / 2), 6.1232339957367658861e-17},
		// The smallest subnormal: -1074 ln 2.
		{"ln 2^-1074", Log(5e-324), -744.44007192138126231},
		{"e^709.7827", Exp(709.7827), 1.7976699566638014654e308},
		// (1+u)**(2/u) = e**2 (1 - u + ...), u = 2**-52; (1-v)**(1/v) = e**-1 (1 - v/2), v = 2**-53.
		{"(1+u)^(2/u)", Pow(1+0x1p-52, 1<<53), 7.3890560989306485868},
		{"(1-v)^(1/v)", Pow(1-0x1p-53, 1<<53), 0.36787944117144230118},
		// The double nearest 0.1 raised to 3, from its exact binary value.
		{"0.1^3", Pow(0.1, 3), 1.0000000000000001665e-3},
	}
	for _, c := range cases {
		if d := ulps(c.got, c.want); d > 1 {
			t.Errorf("%s: got %.20g, want %.20g (%v ulp)", c.name, c.got, c.want, d)
		}
	}
}

// Near 1 math.Asin and math.Acos cancel; the half-angle identity acos x = 2 asin sqrt((1-x)/2)
// uses the other branch of ours and exact halves.
func TestInverseNearOne(t *testing.T) {
	for i := 1; i < 20_000; i++ {
		x := 1 - float64(i)*0x1p-16
		if d := ulps(Acos(x), 2*Asin(math.Sqrt((1-x)/2))); d > 3 {
			t.Errorf("Acos(%v): %v ulp from 2 asin sqrt((1-x)/2)", x, d)
		}
		if d := ulps(Asin(x), math.Pi/2-2*Asin(math.Sqrt((1-x)/2))); d > 3 {
			t.Errorf("Asin(%v): %v ulp from pi/2 - 2 asin sqrt((1-x)/2)", x, d)
		}
	}
}

// The values of testdata/decimal_digits.txt are good to 25 digits: a true measure of the error.
func TestDecimalDigits(t *testing.T) {
	data, err := os.ReadFile("testdata/decimal_digits.txt")
	if err != nil {
		t.Fatal(err)
	}
	worst, rows := map[string]float64{}, 0
	for line := range strings.Lines(string(data)) {
		fields := strings.Fields(line)
		if fields[0] == "#" {
			continue
		}
		v := make([]float64, len(fields)-1)
		for i, s := range fields[1:] {
			if v[i], err = strconv.ParseFloat(s, 64); err != nil {
				t.Fatal(err)
			}
		}
		var got float64
		switch fields[0] {
		case "Exp":
			got = Exp(v[0])
		case "Log":
			got = Log(v[0])
		case "Pow":
			got = Pow(v[0], v[1])
		default:
			for _, f := range functions {
				if f.name == fields[0] {
					got = f.mine(v[0])
				}
			}
		}
		rows++
		d := ulps(got, v[len(v)-1])
		worst[fields[0]] = max(worst[fields[0]], d)
		allowed := 1.0
		if fields[0] == "Tan" {
			allowed = 2
		}
		if d > allowed {
			t.Errorf("%s: got %.20g, %v ulp off", strings.TrimSpace(line), got, d)
		}
	}
	if rows != 3400 {
		t.Errorf("%d rows read, want 3400", rows)
	}
	t.Logf("worst %v", worst)
}

func TestHugeAngles(t *testing.T) {
	for _, x := range []float64{1.7e6, 1e7, 1e9, 123456789.125, 1e15, 1e22, -1e22, 1e100, math.MaxFloat64, -1.7e6} {
		if math.Abs(Sin(x)-math.Sin(x)) > 4e-16 || math.Abs(Cos(x)-math.Cos(x)) > 4e-16 {
			t.Errorf("x %v: sin %v cos %v, math %v %v", x, Sin(x), Cos(x), math.Sin(x), math.Cos(x))
		}
	}
	// Known from the literature on argument reduction (Ng 1992): sin(1e22).
	if got := Sin(1e22); math.Abs(got-(-0.8522008497671888)) > 2e-16 {
		t.Errorf("Sin(1e22) = %v", got)
	}
}

func TestProperties(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		x := rapid.Float64Range(-1e7, 1e7).Draw(t, "x")
		s, c := Sincos(x)
		if s != Sin(x) || c != Cos(x) {
			t.Fatalf("Sincos(%v) differs from Sin and Cos", x)
		}
		if r := s*s + c*c; math.Abs(r-1) > 4e-16 {
			t.Fatalf("sin^2+cos^2 of %v is %v", x, r)
		}
		if Sin(-x) != -s || Cos(-x) != c {
			t.Fatalf("symmetry broken at %v", x)
		}
		a := Atan2(s, c)
		if math.Abs(Sin(a)-s) > 4e-16 || math.Abs(Cos(a)-c) > 4e-16 {
			t.Fatalf("Atan2 does not invert at %v", x)
		}
		p := rapid.Float64Range(1e-300, 1e300).Draw(t, "p")
		if q := Exp(Log(p)); math.Abs(q/p-1) > 2e-13 {
			t.Fatalf("Exp(Log(%v)) = %v", p, q)
		}
		q := rapid.Float64Range(1e-300, 1e300).Draw(t, "q")
		if p < q && Log(p) > Log(q) {
			t.Fatalf("Log falls from %v to %v", p, q)
		}
		u := rapid.Float64Range(-1, 1).Draw(t, "u")
		if d := math.Abs(Asin(u) + Acos(u) - math.Pi/2); d > 5e-16 {
			t.Fatalf("Asin+Acos of %v misses pi/2 by %v", u, d)
		}
	})
}

// golden lists fixed inputs; the bits of the results must be the same on every CPU, with
// every compiler and at every GOAMD64 level. They enter row digests: a changed line
// is a raise of judge_version.
func TestGoldenBits(t *testing.T) {
	var b strings.Builder
	one := func(name string, f func(float64) float64, xs ...float64) {
		for _, x := range xs {
			fmt.Fprintf(&b, "%s %v %016x\n", name, x, math.Float64bits(f(x)))
		}
	}
	grid := []float64{0.001, 0.01, 0.1, 0.3, 0.4375, 0.5, 0.7, 0.99, 1, 1.25, 1.5707963267948966, 2, 2.718281828459045, 3.141592653589793, 5.5, 10, 33.3, 100, 363.77, 1234.5678, 99999.9}
	one("Exp", Exp, append([]float64{-745, -700.5, -87.1, -5, -0.059, -0.001, 700.5}, grid[:17]...)...)
	one("Log", Log, append([]float64{5e-324, 1e-300, 288.15, 1013.25, 1e300}, grid...)...)
	for _, f := range functions[2:5] {
		one(f.name, f.mine, append([]float64{-0.3, -4.2, -1e5, 2e6, 1e22}, grid...)...)
	}
	one("Asin", Asin, -1, -0.99, -0.6, -0.5, -0.1, 0.01, 0.3, 0.5, 0.7, 0.974, 0.976, 0.999999)
	one("Acos", Acos, -1, -0.99, -0.6, -0.5, -0.1, 0.01, 0.3, 0.5, 0.7, 0.974, 0.976, 0.999999)
	one("Atan", Atan, append([]float64{-0.2, -7, 1e10}, grid...)...)
	for _, x := range []float64{1e-3, 0.017, 0.1, 0.5, 0.866, 0.9999, 1.0001, 1.5, 7, 288.15, 1e6} {
		for _, y := range []float64{-37.2, -3, -1.6364, -0.3034, 0.0051, 0.2, 0.873, 1.2, 3, 4, 100.5} {
			fmt.Fprintf(&b, "Pow %v,%v %016x\n", x, y, math.Float64bits(Pow(x, y)))
		}
	}
	for _, p := range [][2]float64{{1, 2}, {-1, 2}, {1, -2}, {-1, -2}, {0.3, 1e-9}, {5, 0.1}, {1e-300, 1}} {
		fmt.Fprintf(&b, "Atan2 %v,%v %016x\n", p[0], p[1], math.Float64bits(Atan2(p[0], p[1])))
	}
	const path = "testdata/golden_bits.txt"
	if *update {
		if err := os.WriteFile(path, []byte(b.String()), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	compareLines(t, b.String(), string(want))
}

func compareLines(t *testing.T, got, want string) {
	t.Helper()
	g, w := bufio.NewScanner(strings.NewReader(got)), bufio.NewScanner(strings.NewReader(want))
	for line := 1; ; line++ {
		gok, wok := g.Scan(), w.Scan()
		if !gok && !wok {
			return
		}
		if g.Text() != w.Text() {
			t.Errorf("line %d: got %q, golden %q", line, g.Text(), w.Text())
		}
	}
}

func benchOne(b *testing.B, f func(float64) float64, lo, hi float64) {
	var xs [1024]float64
	for i := range xs {
		xs[i] = lo + (hi-lo)*float64(i*389%1024)/1024
	}
	sink := 0.0
	for i := range b.N {
		sink += f(xs[i&1023])
	}
	benchSink = sink
}

var benchSink float64

func BenchmarkExp(b *testing.B)  { benchOne(b, Exp, -20, 5) }
func BenchmarkLog(b *testing.B)  { benchOne(b, Log, 0.01, 1000) }
func BenchmarkSin(b *testing.B)  { benchOne(b, Sin, -7, 7) }
func BenchmarkAtan(b *testing.B) { benchOne(b, Atan, -3, 3) }
func BenchmarkAcos(b *testing.B) { benchOne(b, Acos, -1, 1) }
func BenchmarkPow(b *testing.B) {
	benchOne(b, func(x float64) float64 { return Pow(x, 1.2) }, 0.01, 1)
}
func BenchmarkAtan2(b *testing.B) {
	benchOne(b, func(x float64) float64 { return Atan2(x, 0.3) }, -1, 1)
}
func BenchmarkSincos(b *testing.B) {
	benchOne(b, func(x float64) float64 { s, c := Sincos(x); return s + c }, -7, 7)
}
func BenchmarkStdExp(b *testing.B) { benchOne(b, math.Exp, -20, 5) }
func BenchmarkStdPow(b *testing.B) {
	benchOne(b, func(x float64) float64 { return math.Pow(x, 1.2) }, 0.01, 1)
}
