package fault

import (
	"math"

	"fluxwarden/rules"
)

// noise: minutes stand alone, off both neighbours, and nothing else at the station shares it. By day the other two of global, direct
// and diffuse must have gone smoothly for some minutes before and after: at the edge of a cloud the three do not follow alike. At night
// there is nothing to go up and down. It is told two minutes late.
func noise(w *Watcher, c *faultCase, v *view) hint {
	at := w.prev(1)
	if at.minute != v.minute-2 || w.prev(5).minute != v.minute-6 {
		return nothing
	}
	mine := math.Abs(w.swing(2, c.quantity))
	if math.IsNaN(mine) {
		return nothing
	}
	if v.night {
		if mine > 12 {
			return hint{1, mine}
		}
		return hint{odds: -0.03}
	}
	if !at.sunUp {
		return nothing
	}
	others := 0.0
	for k := 1; k <= 5; k++ {
		for _, q := range threeShortwave {
			if q != c.quantity {
				others = max(others, w.inGlobal(math.Abs(w.swing(k, q)), q, at.mu))
			}
		}
	}
	mine = w.inGlobal(mine, c.quantity, at.mu)
	for _, k := range [2]int{0, 2} { // its neighbours must close: else something else is wrong
		if p := w.prev(k); !(math.Abs(p.g()-p.sum) < 3*p.room) {
			return nothing
		}
	}
	for _, q := range threeShortwave {
		if q != c.quantity && (w.tainted(q) || v.run[q] > 1) {
			return nothing
		}
	}
	switch {
	case math.IsNaN(others):
		return nothing
	case mine > 25 && others < 0.2*mine:
		return hint{1, mine}
	case others > 10:
		return nothing // the sky itself is moving
	}
	return hint{odds: -0.03}
}

// swing is the second difference of global, direct or diffuse k minutes ago, 1 or more: how far it stood off its neighbours' mean.
func (w *Watcher) swing(k int, q rules.Quantity) float64 {
	if k == 1 {
		return w.now.swing[q]
	}
	return w.prev(k - 2).swing[q]
}

// inGlobal is how much of a change of a quantity would show in global.
func (w *Watcher) inGlobal(change float64, q rules.Quantity, mu float64) float64 {
	if q == rules.Direct {
		return change * mu
	}
	return change
}
