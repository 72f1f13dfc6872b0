package simtest

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"fmt"
	"math"

	"fluxwarden/qc/engine"
)

// digest is a hash over everything that is known of a day's minutes.
func digest(j *engine.Judged) string {
	b := make([]byte, 0, 1<<16)
	number := func(v uint64) { b = binary.LittleEndian.AppendUint64(b, v) }
	float := func(v float64) {
		if math.IsNaN(v) {
			number(math.MaxUint64)
		} else {
			number(math.Float64bits(v))
		}
	}
	number(uint64(j.Rows))
	for k := range j.Series {
		s := &j.Series[k]
		b = append(b, s.Instrument...)
		for i := range j.Rows {
			float(s.Measured[i])
			float(s.Value[i])
			number(uint64(s.N[i]))
			number(uint64(s.Verdict[i]))
			number(uint64(s.Missed[i]))
			number(uint64(s.Passed[i]))
			number(uint64(s.Faults[i]))
		}
	}
	sum := sha256.Sum256(b)
	return fmt.Sprintf("%d rows, %s", j.Rows, hex.EncodeToString(sum[:8]))
}
