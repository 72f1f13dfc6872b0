package exact

import "math"

// A Curve is a smooth function tabulated at equal steps. Between the nodes it is the cubic through the four nearest (Lagrange): where the
// fourth derivative is f4 and the step h, its error is at most 3/128 h^4 |f4| inside and about twice that in the first and the last cell.
type Curve struct {
	low, perStep float64
	nodes        []float64
}

// NewCurve tabulates f from low to high in so many cells, three at least.
func NewCurve(low, high float64, cells int, f func(float64) float64) Curve {
	step := (high - low) / float64(cells)
	c := Curve{low: low, perStep: 1 / step, nodes: make([]float64, cells+1)}
	for i := range c.nodes {
		c.nodes[i] = f(low + float64(step*float64(i)))
	}
	return c
}

// At is the function's value; NaN outside of what is tabulated.
func (c *Curve) At(x float64) float64 {
	i, w, ok := c.Weights(x)
	if !ok {
		return math.NaN()
	}
	n := c.nodes[i : i+4 : i+4]
	return float64(w[0]*n[0]) + float64(w[1]*n[1]) + float64(w[2]*n[2]) + float64(w[3]*n[3])
}

// Weights gives the first of the four nodes about x and what each counts, for those who tabulate several functions at the same nodes.
func (c *Curve) Weights(x float64) (first int, w [4]float64, ok bool) {
	at := float64((x - c.low) * c.perStep)
	last := len(c.nodes) - 4
	if !(at >= 0 && at <= float64(last+3)) {
		return 0, w, false
	}
	first = min(max(int(at)-1, 0), last)
	return first, CubicWeights(at - float64(first)), true
}

// CubicWeights is what the values at 0, 1, 2 and 3 count at t in the cubic through them.
func CubicWeights(t float64) [4]float64 {
	a, b, c := t-1, t-2, t-3
	ab, tc := float64(a*b), float64(t*c)
	return [4]float64{float64(ab*c) * (-1.0 / 6), float64(tc*b) * 0.5, float64(tc*a) * -0.5, float64(ab*t) * (1.0 / 6)}
}
