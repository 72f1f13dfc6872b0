package worker

import (
	"math"
	"reflect"
	"testing"

	"pgregory.net/rapid"

	"fluxwarden/qc/minute"
)

func drawReading(t *rapid.T) minute.Reading {
	r := minute.Reading{At: minute.Stamp(rapid.Int64Range(0, 5).Draw(t, "at")), Received: minute.Stamp(rapid.Int64Range(0, 2).Draw(t, "received")),
		Ahead: rapid.Bool().Draw(t, "ahead")}
	for _, c := range []string{"a", "b", "c"} {
		switch rapid.IntRange(0, 2).Draw(t, c) {
		case 1:
			r.Values = append(r.Values, minute.ChannelValue{Channel: c, Value: minute.Single(float64(rapid.IntRange(0, 2).Draw(t, "v")))})
		case 2:
			r.Values = append(r.Values, minute.ChannelValue{Channel: c, Value: minute.Value{Mean: 1, SD: math.NaN(), Min: 0, Max: 2, N: 7}})
		}
	}
	return r
}

func readingsOf(b *minute.Batch) []minute.Reading {
	var all []minute.Reading
	for i := range b.At {
		all = append(all, b.Reading(i))
	}
	return all
}

// Joining batches by columns and reading by reading must give the same readings.
func TestAppendAll(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		one, other := &minute.Batch{}, &minute.Batch{}
		want := &minute.Batch{}
		for _, b := range []*minute.Batch{one, other} {
			for range rapid.IntRange(0, 5).Draw(t, "rows") {
				r := drawReading(t)
				b.Append(&r)
				want.Append(&r)
			}
		}
		appendAll(one, other)
		got, expect := readingsOf(one), readingsOf(want)
		if len(got) != len(expect) {
			t.Fatalf("%d readings, want %d", len(got), len(expect))
		}
		for i := range got {
			if !sameReading(&got[i], &expect[i]) {
				t.Fatalf("reading %d: %+v, want %+v", i, got[i], expect[i])
			}
		}
	})
}

func sameReading(a, b *minute.Reading) bool {
	if a.At != b.At || a.Received != b.Received || a.Ahead != b.Ahead {
		return false
	}
	keys := func(r *minute.Reading) map[valueKey]bool {
		m := map[valueKey]bool{}
		for i := range r.Values {
			m[keyOf(r.At, &r.Values[i])] = true
		}
		return m
	}
	return reflect.DeepEqual(keys(a), keys(b))
}

// The two ways of telling what is new must agree, and must not depend on the order of arrival.
func TestWhatIsKnown(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		k, b := newKnown(), &minute.Batch{}
		for range rapid.IntRange(1, 12).Draw(t, "readings") {
			r := drawReading(t)
			x, y := r, r
			left, dropped := k.fresh(&x)
			left2, dropped2 := strip(b, &y)
			if left != left2 || dropped != dropped2 || !sameReading(&x, &y) {
				t.Fatalf("%+v: %v %d %+v against %v %d %+v", r, left, dropped, x, left2, dropped2, y)
			}
			if left {
				b.Append(&y)
			}
		}
		seen := newKnown()
		for _, r := range readingsOf(b) {
			if left, dropped := seen.fresh(&r); !left || dropped > 0 {
				t.Fatalf("kept twice: %+v", r)
			}
		}
	})
}
