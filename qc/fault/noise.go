package fault

import (
	"math"

	"fluxwarden/rules"
)

// noise: minutes stand alone, off both neighbours, and nothing else at the station shares it. By day the other two of global, direct
// and diffuse must have gone smoothly; at night there is nothing to go up and down.
func noise(w *Watcher, c *faultCase, v *view) hint {
	p, o := &w.before[0], &w.before[1]
	if p.minute != v.minute-1 || o.minute != v.minute-2 {
		return nothing
	}
	x := func(q rules.Quantity) float64 { return p.value[q] - (o.value[q]+v.value[q])/2 }
	own := x(c.quantity)
	if math.IsNaN(own) {
		return nothing
	}
	if v.night {
		if math.Abs(own) > 12 {
			return hint{1, math.Abs(own)}
		}
		return hint{odds: -0.03}
	}
	if !v.sunUp {
		return nothing
	}
	// the three second differences, each as it would show in global
	part := [3]float64{math.Abs(x(rules.Global)), math.Abs(x(rules.Direct)) * v.mu, math.Abs(x(rules.Diffuse))}
	mine, others := part[c.quantity], 0.0
	for k, s := range part {
		if rules.Quantity(k) != c.quantity {
			others = math.Max(others, s)
		}
	}
	switch {
	case math.IsNaN(others) || math.IsNaN(mine):
		return nothing
	case mine > 25 && others < 0.25*mine:
		return hint{1, mine}
	case others > 10:
		return nothing // the sky itself is moving
	}
	return hint{odds: -0.03}
}
