package worker

import (
	"math"

	"fluxwarden/qc/minute"
)

// known says which values a set of readings already holds. What identifies a value is its channel, its stamp and all that
// it says; a reading without values is identified by its stamp, and being ahead of the time of receipt counts as one value more.
type known struct {
	stamps map[minute.Stamp]bool // true where one under the stamp was ahead
	values map[valueKey]struct{}
}

type valueKey struct {
	at                 minute.Stamp
	channel            string
	mean, sd, min, max uint64
	n                  int32
}

func newKnown() *known {
	return &known{stamps: map[minute.Stamp]bool{}, values: map[valueKey]struct{}{}}
}

func keyOf(at minute.Stamp, v *minute.ChannelValue) valueKey {
	n := v.N
	if n == 0 {
		n = 1
	}
	return valueKey{at, v.Channel, bits(v.Mean), bits(v.SD), bits(v.Min), bits(v.Max), n}
}

// bits makes values equal that compare as equal: both zeros, and every NaN.
func bits(v float64) uint64 {
	switch {
	case v == 0:
		return 0
	case math.IsNaN(v):
		return math.MaxUint64
	}
	return math.Float64bits(v)
}

// fresh takes from the reading what is known already, notes the rest as known, and says whether anything is left. The
// number of values dropped is returned beside it; a reading dropped whole counts at least one.
func (k *known) fresh(r *minute.Reading) (left bool, dropped int) {
	ahead, seen := k.stamps[r.At]
	kept := make([]minute.ChannelValue, 0, len(r.Values))
	for i := range r.Values {
		key := keyOf(r.At, &r.Values[i])
		if _, ok := k.values[key]; ok {
			dropped++
			continue
		}
		k.values[key] = struct{}{}
		kept = append(kept, r.Values[i])
	}
	r.Values = kept
	left = len(kept) > 0 || !seen || r.Ahead && !ahead
	k.stamps[r.At] = ahead || r.Ahead
	if !left && dropped == 0 {
		dropped = 1
	}
	return left, dropped
}

func (k *known) add(b *minute.Batch) {
	for i := range b.At {
		r := b.Reading(i)
		k.fresh(&r)
	}
}

// strip takes from the reading the values that the batch holds under its stamp; as fresh, for a batch that is small.
func strip(b *minute.Batch, r *minute.Reading) (left bool, dropped int) {
	seen, ahead := false, false
	for i := len(b.At) - 1; i >= 0; i-- {
		if b.At[i] != r.At {
			continue
		}
		seen = true
		ahead = ahead || b.Ahead != nil && b.Ahead[i]
		kept := make([]minute.ChannelValue, 0, len(r.Values))
		for k := range r.Values {
			if holds(b, i, r.At, &r.Values[k]) {
				dropped++
			} else {
				kept = append(kept, r.Values[k])
			}
		}
		r.Values = kept
	}
	left = len(r.Values) > 0 || !seen || r.Ahead && !ahead
	if !left && dropped == 0 {
		dropped = 1
	}
	return left, dropped
}

func holds(b *minute.Batch, row int, at minute.Stamp, v *minute.ChannelValue) bool {
	for c := range b.Channels {
		if b.Channels[c].Name != v.Channel {
			continue
		}
		if math.IsNaN(b.Channels[c].Mean[row]) {
			return false
		}
		have := minute.ChannelValue{Channel: v.Channel, Value: b.Channels[c].Value(row)}
		return keyOf(at, &have) == keyOf(at, v)
	}
	return false
}
