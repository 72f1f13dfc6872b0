package uncertainty

import "math"

// What a value owes to being restored, plus or minus: the estimate of what was taken off is good to a quarter of it, and to nothing better
// than 1 W/m2 (own choice: night and day offsets differ).
const (
	restoredShare  = 0.25
	restoredLeast  = 1
	restoredAtMost = 1e140
)

// Restored gives the expanded uncertainty, k=2, of a value restored from a fault, in the quantity's unit. C is of the restored value;
// correction is what was added to the measured one by an estimate, 0 where signs or channels were put right. It is larger
// than U95.
func (b *Budget) Restored(c *Conditions, correction float64) float64 {
	share := math.Min(math.Abs(correction), restoredAtMost)
	return Coverage * Combine(b.Standard(c), Rectangular.Standard(restoredLeast+float64(restoredShare*share)))
}
