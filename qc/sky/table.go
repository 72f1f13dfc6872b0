package sky

import (
	"math"

	"fluxwarden/qc/exact"
)

const (
	gridNodes   = 91 // one a degree of the apparent zenith angle, 0..90
	steepDeg    = 87
	twilightDeg = 6 // civil twilight: below it nothing of the day is left
)

// A Table gives a site's cloudless sky minute by minute. Its models are worked out at whole degrees of the apparent zenith angle, each when the
// sun first comes near it, and again when the state has changed; between them it is the cubic through four. Against the model itself it
// is within 0.25 W/m2 up to 80 degrees (Ineichen's beam has a kink there) and 2 W/m2 beyond: a test holds it. Solis falls too steeply near the
// horizon to be drawn through whole degrees: from 87 degrees on it is worked out each time.
//
// What it gives is a function of the last state set and the sun alone.
type Table struct {
	site    *Site
	state   State
	aerosol birdAerosol
	turn    uint32 // of the state
	filled  [gridNodes]uint32
	direct  [gridNodes]float64 // for one unit outside the atmosphere
	diffuse [gridNodes]float64
}

// NewTable makes a table of a site in a state.
func NewTable(site *Site, st State) *Table {
	t := &Table{site: site}
	t.Set(st)
	return t
}

// Set changes the state.
func (t *Table) Set(st State) {
	if t.turn > 0 && st == t.state {
		return
	}
	t.state, t.turn = st, t.turn+1
	t.aerosol = newBirdAerosol(st.Aerosol)
}

// State is the state set last.
func (t *Table) State() State { return t.state }

// At is the cloudless irradiance, global as direct on the horizontal plus diffuse (which Solis has a little apart); in civil twilight diffuse
// alone is left, and beyond nothing. CosZenith is of the same zenith angle.
func (t *Table) At(apparentZenithDeg, cosZenith, extraterrestrialWm2 float64) Irradiance {
	if !(apparentZenithDeg < 90) {
		return t.twilight(apparentZenithDeg, extraterrestrialWm2)
	}
	if apparentZenithDeg > steepDeg && t.site.model == SimplifiedSolis {
		share := t.site.whole(apparentZenithDeg, &t.state)
		direct, diffuse := float64(share.DirectWm2*extraterrestrialWm2), float64(share.DiffuseWm2*extraterrestrialWm2)
		return Irradiance{GlobalWm2: float64(direct*cosZenith) + diffuse, DirectWm2: direct, DiffuseWm2: diffuse}
	}
	first := min(max(int(apparentZenithDeg)-1, 0), gridNodes-4)
	for i := first; i < first+4; i++ {
		if t.filled[i] != t.turn {
			t.fill(i)
		}
	}
	w := exact.CubicWeights(apparentZenithDeg - float64(first))
	for k := range w {
		w[k] = float64(w[k] * extraterrestrialWm2)
	}
	direct, diffuse := weigh(&w, t.direct[first:]), weigh(&w, t.diffuse[first:])
	return Irradiance{GlobalWm2: float64(direct*cosZenith) + diffuse, DirectWm2: direct, DiffuseWm2: diffuse}
}

func weigh(w *[4]float64, n []float64) float64 {
	n = n[:4:4]
	return max(0, float64(w[0]*n[0])+float64(w[1]*n[1])+float64(w[2]*n[2])+float64(w[3]*n[3]))
}

func (t *Table) fill(i int) {
	var share Irradiance
	if t.site.model == BirdHulstrom {
		share = t.site.nodes[i].share(&t.state, t.site.pressure, t.aerosol)
	} else {
		share = t.site.whole(float64(i), &t.state)
	}
	t.direct[i], t.diffuse[i] = share.DirectWm2, share.DiffuseWm2
	t.filled[i] = t.turn
}

// twilight is what the sky still scatters once the sun is down: the diffuse at the horizon, falling as illuminance does. Its logarithm falls by
// 0.5 d + 0.066 d^2 at d degrees below the horizon, through 730 lux at 0 and 3.4 lux at 6 degrees (Explanatory Supplement to the Astronomical
// Almanac, from memory).
func (t *Table) twilight(apparentZenithDeg, extraterrestrialWm2 float64) Irradiance {
	below := apparentZenithDeg - 90
	if !(below < twilightDeg) {
		return Irradiance{}
	}
	const horizon = gridNodes - 1
	if t.filled[horizon] != t.turn {
		t.fill(horizon)
	}
	d := float64(t.diffuse[horizon] * extraterrestrialWm2 * exact.Exp(-float64(below*(0.5+float64(0.066*below)))))
	return Irradiance{GlobalWm2: d, DiffuseWm2: d}
}

// AerosolOf is the aerosol load that makes the site's model give a measured direct normal irradiance in the state, whose own load does not
// count; NaN for a beam that is not positive, 0 for one that is brighter than the cleanest sky, AerosolMax for one that is dimmer than the
// thickest.
func (s *Site) AerosolOf(directWm2, apparentZenithDeg, extraterrestrialWm2 float64, st *State) float64 {
	if !(directWm2 > 0 && extraterrestrialWm2 > 0 && apparentZenithDeg >= 0 && apparentZenithDeg < 90) {
		return math.NaN()
	}
	switch s.model {
	case BirdHulstrom:
		n := newBirdNode(apparentZenithDeg, s.pressure)
		parts := n.parts(st, s.pressure)
		y := exact.Log(float64(parts.cleanBeam()*extraterrestrialWm2)/directWm2) / n.aerosolMass
		return min(birdAerosol(y).tau(), AerosolMax)
	default:
		return s.bisect(directWm2/extraterrestrialWm2, apparentZenithDeg, st)
	}
}

// bisect finds the load by halving: the beam falls with it.
func (s *Site) bisect(share, zenithDeg float64, st *State) float64 {
	low, high := 0.0, float64(AerosolMax)
	if s.model == SimplifiedSolis {
		high = solisAerosolMax
	}
	at := *st
	for range 14 { // to 2e-4
		at.Aerosol = (low + high) / 2
		if s.whole(zenithDeg, &at).DirectWm2 > share {
			low = at.Aerosol
		} else {
			high = at.Aerosol
		}
	}
	return (low + high) / 2
}
