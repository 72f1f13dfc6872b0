package fault

import (
	"math"
	"slices"

	"fluxwarden/qc/sky"
)

// A Baseline is what the days before have taught of a station: how its sound instruments stand to each other and how clear its
// sky is. A sound station can live with a closure of 0.97; what counts is a change.
type Baseline struct {
	closure   [sectors]float64 // global over direct on the horizontal plus diffuse, by the sun's sector
	known     bool             // closure rests on enough sunlit minutes
	bySector  [sectors]bool    // it does so with the sun there
	spread    [sectors]float64 // how far its steady minutes scatter within a day: half of what holds the middle half
	overcast  float64          // global over diffuse without a beam
	overcastN int
	dull      float64    // how far it scatters within a day
	zero      [3]float64 // night value of global, direct, diffuse, W/m2
	zeroKnown [3]bool
	sky       sky.Learnt // what its cloudless sky is expected to be
	skyKnown  bool
	bodyAir   [2]float64 // pyrgeometer body less air, by night and by day, K
	bodyKnown [2]bool
	kLW       float64 // measured over modelled clear-sky longwave
	lwKnown   bool
	// how far the closure, and global over diffuse under thick cloud, stood off their usual on the days before, yesterday first; NaN where they
	// were not seen
	lately [2][latelyDays]float64
}

// The sun's sectors: morning and afternoon, by height.
const sectors = 6

func sectorOf(v *view) int {
	s := 0
	switch {
	case v.zenithDeg > 75:
		s = 2
	case v.zenithDeg > 60:
		s = 1
	}
	if v.azimuthDeg > 180 {
		s += 3
	}
	return s
}

// closureAt is the closure that the station's sound instruments have with the sun where it is.
func (b *Baseline) closureAt(v *view) float64 { return b.closure[sectorOf(v)] }

const (
	// trustedMinutes is how many minutes a day's fact must rest on to be taken.
	trustedMinutes = 20
	// defaultSpread is the scatter assumed before the station's own is known.
	defaultSpread = 0.01
)

// learn makes the baseline from the facts of the days before.
func learn(s *Setup, day int64, facts []DayFacts) Baseline {
	b := Baseline{kLW: 1, overcast: 1, dull: defaultSpread}
	all, n := medianOf(facts, trustedMinutes, func(f *DayFacts) Fact { return f.Closure })
	b.known = n >= 100
	if !b.known {
		all = 1
	}
	for k := range b.closure {
		b.closure[k], b.spread[k] = all, defaultSpread
		if m, n := medianOf(facts, trustedMinutes, func(f *DayFacts) Fact { return f.Sector[k].asSpread() }); n >= 100 {
			b.spread[k] = m
		}
		if m, n := medianOf(facts, trustedMinutes, func(f *DayFacts) Fact { return f.Sector[k] }); b.known && n >= 100 {
			b.closure[k], b.bySector[k] = m, true
		}
	}
	if m, n := medianOf(facts, trustedMinutes, func(f *DayFacts) Fact { return f.Overcast }); n >= 60 {
		b.overcast, b.overcastN = m, n
		b.dull, _ = medianOf(facts, trustedMinutes, func(f *DayFacts) Fact { return f.Overcast.asSpread() })
	}
	for k := range b.zero {
		m, n := medianOf(facts, trustedMinutes, func(f *DayFacts) Fact { return f.Zero[k] })
		if n >= 60 {
			b.zero[k], b.zeroKnown[k] = m, true
		}
	}
	closure := math.NaN()
	if b.known {
		closure = all
	}
	b.sky = learnSky(s, day, facts, closure)
	b.skyKnown = b.sky.Days > 0
	b.rememberLately(facts)
	for k := range b.bodyAir {
		if m, n := medianOf(facts, trustedMinutes, func(f *DayFacts) Fact { return f.BodyAir[k] }); n >= 60 {
			b.bodyAir[k], b.bodyKnown[k] = m, true
		}
	}
	if m, n := medianOf(facts, trustedMinutes, func(f *DayFacts) Fact { return f.ClearLW }); n >= 60 {
		b.kLW, b.lwKnown = m, true
	}
	return b
}

// latelyDays is how many days a slow change is looked for in.
const latelyDays = 10

// rememberLately takes what the last days said of how the instruments stand to each other.
func (b *Baseline) rememberLately(facts []DayFacts) {
	usual := [2]float64{math.NaN(), math.NaN()}
	usual[0], _ = medianOf(facts, trustedMinutes, func(f *DayFacts) Fact { return f.Closure })
	usual[1], _ = medianOf(facts, trustedMinutes, func(f *DayFacts) Fact { return f.Overcast })
	for k := range latelyDays {
		b.lately[0][k], b.lately[1][k] = math.NaN(), math.NaN()
		if k >= len(facts) {
			continue
		}
		for i, f := range [2]Fact{facts[len(facts)-1-k].Closure, facts[len(facts)-1-k].Overcast} {
			if f.N >= trustedMinutes {
				b.lately[i][k] = f.Median.Float()/usual[i] - 1
			}
		}
	}
}

// medianOf is the median over days of one fact, of the days that rest on enough minutes, and how many minutes they are
// together; NaN and 0 without any.
func medianOf(facts []DayFacts, least int, pick func(*DayFacts) Fact) (float64, int) {
	var values [32]float64
	k, n := 0, 0
	for i := range facts {
		f := pick(&facts[i])
		if f.N >= least && k < len(values) && !math.IsNaN(f.Median.Float()) {
			values[k] = f.Median.Float()
			k++
			n += f.N
		}
	}
	if k == 0 {
		return math.NaN(), 0
	}
	v := values[:k]
	slices.Sort(v)
	if k%2 == 1 {
		return v[k/2], n
	}
	return (v[k/2-1] + v[k/2]) / 2, n
}
