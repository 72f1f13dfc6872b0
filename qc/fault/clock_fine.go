package fault

// A fineShift weighs a small shift of the clock by many minutes. Each one's deviation from the station's own closure is
//
//	y = a x + c + scatter
//
// with x what the shift implies there, a 1 if the clock jumped and 0 if it did not, and c whatever else is off by a constant share in that half
// of the day, an old or a new gain, normal about nothing. The morning and the afternoon must each bear the shift out: with a shift the one
// closes high and the other low, where a gain or an offset has them both high or both low.
type fineShift struct {
	Half [2]halfDay `json:"half"` // morning, afternoon
}

// A halfDay holds sums over minutes of the weights, of the weighted x, y, x x and x y.
type halfDay struct {
	W  Number `json:"w"`
	X  Number `json:"x"`
	Y  Number `json:"y"`
	XX Number `json:"xx"`
	XY Number `json:"xy"`
	N  int    `json:"n"`
}

const (
	fineEvery = 10    // minutes between two looks
	fineGain  = 0.008 // scatter of c (own choice, from the robust scatter of measured days)
	fineLean  = 0.5   // minutes by which the clock would have to be wrong to look as what else changes between morning and afternoon (own choice: 0.2 % of the sum)
	fineLeast = 0.8   // log odds that each half of the day must give
)

// add takes a minute: what the shift implies, what was seen, both as shares of the sum, and the scatter of such minutes.
func (f *fineShift) add(afternoon bool, x, y, scatter float64) {
	h := &f.Half[0]
	if afternoon {
		h = &f.Half[1]
	}
	w := 1 / float64(scatter*scatter*closureTogether)
	h.W += Number(w)
	h.X += Number(w * x)
	h.Y += Number(w * y)
	h.XX += Number(float64(w*x) * x)
	h.XY += Number(float64(w*x) * y)
	h.N++
}

// minutes is how many were taken.
func (f *fineShift) minutes() int { return f.Half[0].N + f.Half[1].N }

// evidence gives the score and the information about a, c integrated out.
func (h *halfDay) evidence() (score, information float64) {
	x, y := h.X.Float(), h.Y.Float()
	free := h.W.Float() + 1/(fineGain*fineGain)
	return h.XY.Float() - float64(x*y)/free, h.XX.Float() - float64(x*x)/free
}

// odds is the log of the likelihood of a shift by some minutes over that of none, with c and the slow change of the instruments' directional
// errors integrated out: the latter looks like a shift itself, so however many the minutes the odds are bounded.
func (f *fineShift) odds(minutes int64) float64 {
	lean := fineLean / float64(minutes)
	odds := func(score, information float64) float64 {
		return (score - float64(information/2)) / (1 + float64(information*lean*lean))
	}
	s0, i0 := f.Half[0].evidence()
	s1, i1 := f.Half[1].evidence()
	all := odds(s0+s1, i0+i1)
	if least := min(odds(s0, i0), odds(s1, i1)); least < fineLeast {
		return min(all, least)
	}
	return all
}

// sooner says how much likelier the one jump is than another by the same shift: what the minutes between the two say, c taken for nothing.
func (f *fineShift) sooner(o *fineShift) float64 {
	sum := 0.0
	for k := range f.Half {
		a, b := &f.Half[k], &o.Half[k]
		sum += (a.XY - b.XY).Float() - float64((a.XX-b.XX).Float()/2)
	}
	return sum
}

// fineScatter is how far a steady minute's closure scatters, as a share of the sum: by itself with the sun where it is, and by the offset of a
// good instrument.
func (w *Watcher) fineScatter(v *view) float64 {
	return 0.003 + w.base.spread[sectorOf(v)] + 2/v.sum
}
