package sun

import (
	"fmt"
	"math"
	"sort"
)

// Horizon is a site's horizon mask: the elevation of what stands in the way, by azimuth. The zero
// value is a flat horizon.
type Horizon struct {
	points [][2]float64 // azimuth, elevation, degrees; ascending azimuth in [0, 360)
}

// NewHorizon takes pairs of azimuth (0..360, from north clockwise) and elevation (-10..90), in
// degrees and any order. It refuses values outside, and two elevations for one azimuth.
func NewHorizon(pairs [][2]float64) (Horizon, error) {
	points := make([][2]float64, 0, len(pairs))
	for i, p := range pairs {
		if !(p[0] >= 0 && p[0] <= 360) {
			return Horizon{}, fmt.Errorf("horizon: point %d: azimuth %v is outside 0..360: count degrees from north, clockwise", i+1, p[0])
		}
		if !(p[1] >= -10 && p[1] <= 90) {
			return Horizon{}, fmt.Errorf("horizon: point %d: elevation %v is outside -10..90: give degrees above the horizontal", i+1, p[1])
		}
		if p[0] == 360 {
			p[0] = 0
		}
		points = append(points, p)
	}
	sort.SliceStable(points, func(i, j int) bool { return points[i][0] < points[j][0] })
	kept := points[:0]
	for i, p := range points {
		if i > 0 && p[0] == kept[len(kept)-1][0] {
			if p[1] != kept[len(kept)-1][1] {
				return Horizon{}, fmt.Errorf("horizon: azimuth %v: two elevations, %v and %v: keep one (0 and 360 are the same azimuth)",
					p[0], kept[len(kept)-1][1], p[1])
			}
			continue
		}
		kept = append(kept, p)
	}
	return Horizon{kept}, nil
}

// ElevationAt returns the mask's elevation in degrees at an azimuth in degrees: linear between
// the points, and from the last over north to the first. A flat horizon gives 0.
func (h Horizon) ElevationAt(azimuthDeg float64) float64 {
	n := len(h.points)
	switch n {
	case 0:
		return 0
	case 1:
		return h.points[0][1]
	}
	a := wrap360(azimuthDeg)
	i := sort.Search(n, func(i int) bool { return h.points[i][0] > a })
	lower, upper := h.points[(i+n-1)%n], h.points[i%n]
	span := wrap360(upper[0] - lower[0])
	f := wrap360(a-lower[0]) / span
	return lower[1] + float64(f*(upper[1]-lower[1]))
}

// Hides reports whether the sun's centre stands behind the mask; take the apparent zenith
// angle, as the eye does. NaN is never hidden.
func (h Horizon) Hides(apparentZenithDeg, azimuthDeg float64) bool {
	return 90-apparentZenithDeg < h.ElevationAt(azimuthDeg) && !math.IsNaN(azimuthDeg)
}
