package simtest

import (
	"fmt"
	"math"

	"fluxwarden/qc/engine"
)

// digest is a hash over everything that is known of a day's minutes. It is not the archive's row digest, which the simulation on the real
// store compares: this one is quick.
func digest(j *engine.Judged) string {
	h := uint64(14695981039346656037)
	mix := func(v uint64) {
		h = (h ^ v) * 0x9E3779B97F4A7C15
		h ^= h >> 29
	}
	float := func(v float64) {
		if math.IsNaN(v) {
			mix(math.MaxUint64)
		} else {
			mix(math.Float64bits(v))
		}
	}
	for k := range j.Series {
		s := &j.Series[k]
		for i := range j.Rows {
			float(s.Measured[i])
			float(s.Value[i])
			mix(uint64(s.N[i])<<32 | uint64(s.Verdict[i]))
			mix(uint64(s.Missed[i]))
			mix(uint64(s.Passed[i]))
			mix(uint64(s.Faults[i]))
		}
	}
	return fmt.Sprintf("%d rows, %016x", j.Rows, h)
}
