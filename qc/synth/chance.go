package synth

import (
	"math"

	"fluxwarden/qc/exact"
)

// A source is a sequence of chance that can be entered at any index: a hash of its key and the index. The mixing is the
// finaliser of splitmix64 (Steele, Lea and Flood 2014, OOPSLA, "Fast splittable pseudorandom number generators").
type source uint64

const goldenGamma = 0x9e3779b97f4a7c15

func mix(z uint64) uint64 {
	z = (z ^ z>>30) * 0xbf58476d1ce4e5b9
	z = (z ^ z>>27) * 0x94d049bb133111eb
	return z ^ z>>31
}

// named derives a source of its own for a purpose.
func (s source) named(name string) source {
	h := uint64(s)
	for i := range len(name) {
		h = mix(h + goldenGamma + uint64(name[i]))
	}
	return source(mix(h + goldenGamma))
}

func (s source) bits(index int64) uint64 { return mix(uint64(s) + goldenGamma*uint64(index)) }

// uniform is in [0, 1).
func (s source) uniform(index int64) float64 { return float64(s.bits(index)>>11) / (1 << 53) }

// normal has mean 0 and variance 1: the sum of four uniform numbers of sixteen bits, so it never leaves ±3.47.
func (s source) normal(index int64) float64 {
	z := s.bits(index)
	sum := z&0xffff + z>>16&0xffff + z>>32&0xffff + z>>48
	return float64((float64(float64(sum)/65536) - (2 - 2.0/65536)) * 1.7320508075688772)
}

// smooth is a normal process with a correlation time of about scaleSeconds: normal values a scale apart, joined by a curve
// without a kink. Its variance is 1 at every time, not only at the joints.
func (s source) smooth(seconds, scaleSeconds float64) float64 {
	x := seconds / scaleSeconds
	cell := math.Floor(x)
	f := x - cell
	w := float64(float64(f*f) * (3 - float64(2*f)))
	v := 1 - w
	norm := math.Sqrt(float64(w*w) + float64(v*v))
	a, b := s.normal(int64(cell)), s.normal(int64(cell)+1)
	return (float64(a*v) + float64(b*w)) / norm
}

// share turns a normal value into its place among all of them, 0..1: the logistic curve that stands for the normal
// distribution to 0.01 (Johnson and Kotz 1970, factor 1.702).
func share(normal float64) float64 { return 1 / (1 + exact.Exp(-1.702*normal)) }

// quantile inverts share; p within (0, 1).
func quantile(p float64) float64 { return exact.Log(p/(1-p)) / 1.702 }

// lerp is a at f 0 and b at f 1.
func lerp(a, b, f float64) float64 { return a + float64((b-a)*f) }

func clamp(x, low, high float64) float64 { return math.Min(math.Max(x, low), high) }

// ramp goes from 0 at low to 1 at high without a kink.
func ramp(x, low, high float64) float64 {
	f := clamp((x-low)/(high-low), 0, 1)
	return float64(float64(f*f) * (3 - float64(2*f)))
}

// resolved rounds to a number of steps per unit, as a logger does.
func resolved(x, stepsPerUnit float64) float64 {
	return math.Floor(float64(x*stepsPerUnit)+0.5) / stepsPerUnit
}
