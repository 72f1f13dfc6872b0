package minute

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
	"time"

	"pgregory.net/rapid"
)

// text prints what a block says, so that two can be compared to the bit, NaN with NaN.
func text(b *Block) string {
	s := fmt.Sprint(b.Day, b.Rows, b.Records[:10], b.Ahead[:10])
	for i := range b.Columns {
		c := &b.Columns[i]
		for r := range 10 {
			s += fmt.Sprintf("\n%d %d %x %x %x %x %d %v", i, r, c.Mean[r], c.SD[r], c.Min[r], c.Max[r], c.N[r], c.Conflict[r])
		}
	}
	return s
}

func valueOf(t *rapid.T) Value {
	v := rapid.OneOf(rapid.SampledFrom([]float64{0, 1, -1, -7999, -9999, 1e300}), rapid.Float64Range(-1000, 1000)).Draw(t, "value")
	if rapid.IntRange(0, 3).Draw(t, "averaged") > 0 {
		return Single(v)
	}
	some := func(name string) float64 {
		if rapid.Bool().Draw(t, "has "+name) {
			return rapid.Float64Range(0, 100).Draw(t, name)
		}
		return math.NaN()
	}
	return Value{v, some("sd"), some("min"), some("max"), int32(rapid.IntRange(1, 100).Draw(t, "n"))}
}

// readingsOf draws readings of the first ten minutes of day 0, with stamps that come twice.
func readingsOf(t *rapid.T) []Reading {
	readings := make([]Reading, rapid.IntRange(0, 40).Draw(t, "readings"))
	for i := range readings {
		r := &readings[i]
		r.At = Stamp(rapid.IntRange(0, 59).Draw(t, "ten seconds")) * 10 * MicrosPerSecond
		r.Ahead = rapid.IntRange(0, 9).Draw(t, "ahead") == 0
		for _, c := range []string{"a", "b", "undeclared"} {
			if rapid.Bool().Draw(t, c) {
				r.Values = append(r.Values, ChannelValue{c, valueOf(t)})
			}
		}
	}
	return readings
}

func gathered(layout Layout, batches ...*Batch) *Block {
	block := NewBlock(0, len(layout.Channels))
	g := NewGatherer(layout)
	var all Batch
	for _, b := range batches {
		for i := range b.Rows() {
			r := b.Reading(i)
			all.Append(&r)
		}
	}
	g.Fill(block, &all, 0, PerDay)
	return block
}

// TestBlockIsOfTheSet: neither the order of the readings, nor repeats, nor how they were cut into batches, nor in how many calls the minutes
// were filled changes a block.
func TestBlockIsOfTheSet(t *testing.T) {
	layout := Layout{Interval: 10 * time.Second, Channels: []string{"a", "b"}}
	rapid.Check(t, func(t *rapid.T) {
		readings := readingsOf(t)
		var straight Batch
		for i := range readings {
			straight.Append(&readings[i])
		}
		want := text(gathered(layout, &straight))

		other := append([]Reading(nil), readings...)
		for range rapid.IntRange(0, 5).Draw(t, "repeats") {
			if len(other) > 0 {
				other = append(other, other[rapid.IntRange(0, len(other)-1).Draw(t, "repeat")])
			}
		}
		shuffle := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "order"), 1))
		shuffle.Shuffle(len(other), func(i, k int) { other[i], other[k] = other[k], other[i] })
		batches := []*Batch{{}, {}, {}}
		for i := range other {
			shuffle.Shuffle(len(other[i].Values), func(a, b int) { v := other[i].Values; v[a], v[b] = v[b], v[a] })
			batches[shuffle.IntN(3)].Append(&other[i])
		}
		if got := text(gathered(layout, batches...)); got != want {
			t.Fatalf("in another order, with repeats, in three batches:\n%s\nwant\n%s", got, want)
		}
		block := NewBlock(0, 2)
		g := NewGatherer(layout)
		for from := 0; from < PerDay; {
			to := min(PerDay, from+1+shuffle.IntN(5))
			if from >= 10 {
				to = PerDay
			}
			g.Fill(block, &straight, from, to)
			from = to
		}
		if got := text(block); got != want {
			t.Fatalf("filled a few minutes at a time:\n%s\nwant\n%s", got, want)
		}
	})
}

// TestPooledIsTheSamplesOwn: averaging in the logger and pooling here gives the statistics of the samples themselves.
func TestPooledIsTheSamplesOwn(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		samples := rapid.SliceOfN(rapid.Float64Range(-1000, 1000), 2, 59).Draw(t, "samples")
		var single, averaged Batch
		for i, v := range samples {
			single.Append(&Reading{At: Stamp(i) * MicrosPerSecond, Values: []ChannelValue{{"a", Single(v)}}})
		}
		for i := 0; i < len(samples); {
			n := rapid.IntRange(1, len(samples)-i).Draw(t, "part")
			averaged.Append(&Reading{At: Stamp(i) * MicrosPerSecond, Values: []ChannelValue{{"a", statisticsOf(samples[i : i+n])}}})
			i += n
		}
		layout := Layout{Interval: time.Second, Channels: []string{"a"}}
		a, b := gathered(layout, &single).Columns[0], gathered(layout, &averaged).Columns[0]
		if a.N[0] != b.N[0] || a.Min[0] != b.Min[0] || a.Max[0] != b.Max[0] || math.Abs(a.Mean[0]-b.Mean[0]) > 1e-9 || math.Abs(a.SD[0]-b.SD[0]) > 1e-8 {
			t.Fatalf("mean %v sd %v min %v max %v n %d of the samples, %v %v %v %v %d pooled",
				a.Mean[0], a.SD[0], a.Min[0], a.Max[0], a.N[0], b.Mean[0], b.SD[0], b.Min[0], b.Max[0], b.N[0])
		}
		if a.Min[0] > a.Mean[0]+1e-9 || a.Mean[0] > a.Max[0]+1e-9 || a.SD[0] < 0 {
			t.Fatalf("mean %v outside %v to %v, sd %v", a.Mean[0], a.Min[0], a.Max[0], a.SD[0])
		}
	})
}

func statisticsOf(samples []float64) Value {
	v := Value{Min: math.Inf(1), Max: math.Inf(-1), SD: math.NaN(), N: int32(len(samples))}
	for _, x := range samples {
		v.Mean += x / float64(len(samples))
		v.Min, v.Max = min(v.Min, x), max(v.Max, x)
	}
	if len(samples) == 1 {
		return Single(samples[0])
	}
	squares := 0.0
	for _, x := range samples {
		squares += (x - v.Mean) * (x - v.Mean)
	}
	v.SD = math.Sqrt(squares / float64(len(samples)-1))
	return v
}
