package minute

import (
	"math"
	"testing"
	"time"
)

func at(t testing.TB, text string) Stamp {
	t.Helper()
	x, err := time.Parse(time.RFC3339Nano, text)
	if err != nil {
		t.Fatal(err)
	}
	return Stamp(x.UnixMicro())
}

// TestLayoutMinute is arithmetic: a record stands for the interval that begins or ends at its stamp.
func TestLayoutMinute(t *testing.T) {
	for _, c := range []struct {
		name     string
		end      bool
		interval time.Duration
		stamp    string
		minute   string // its start
	}{
		{"start, on the minute", false, time.Minute, "2026-06-21T12:00:00Z", "2026-06-21T12:00:00Z"},
		{"start, within it", false, time.Minute, "2026-06-21T12:00:59.999999Z", "2026-06-21T12:00:00Z"},
		{"end, on the minute", true, time.Minute, "2026-06-21T12:00:00Z", "2026-06-21T11:59:00Z"},
		{"end, a microsecond late", true, time.Minute, "2026-06-21T12:00:00.000001Z", "2026-06-21T11:59:00Z"},
		{"end, midnight is the day before", true, time.Minute, "2026-06-21T00:00:00Z", "2026-06-20T23:59:00Z"},
		{"start, midnight", false, time.Minute, "2026-06-21T00:00:00Z", "2026-06-21T00:00:00Z"},
		{"1 Hz start, last second", false, time.Second, "2026-06-21T12:00:59Z", "2026-06-21T12:00:00Z"},
		{"1 Hz end, on the minute", true, time.Second, "2026-06-21T12:01:00Z", "2026-06-21T12:00:00Z"},
		{"1 Hz end, first second", true, time.Second, "2026-06-21T12:01:01Z", "2026-06-21T12:01:00Z"},
		{"10 s end", true, 10 * time.Second, "2026-06-21T12:01:00Z", "2026-06-21T12:00:00Z"},
		{"before 1970, start", false, time.Minute, "1969-12-31T23:59:30Z", "1969-12-31T23:59:00Z"},
		{"before 1970, end", true, time.Minute, "1970-01-01T00:00:00Z", "1969-12-31T23:59:00Z"},
		{"before 1970, a whole minute", false, time.Minute, "1969-12-31T23:58:00Z", "1969-12-31T23:58:00Z"},
	} {
		l := Layout{LabelEnd: c.end, Interval: c.interval}
		if got, want := l.Minute(at(t, c.stamp)), at(t, c.minute).Minute(); got != want {
			t.Errorf("%s: %s belongs to minute %d, want %d", c.name, c.stamp, got, want)
		}
	}
	for interval, want := range map[time.Duration]int{time.Second: 60, 10 * time.Second: 6, time.Minute: 1} {
		l := Layout{Interval: interval}
		if got := l.SamplesExpected(); got != want {
			t.Errorf("interval %v: %d samples expected, want %d", interval, got, want)
		}
	}
}

func TestFloorDiv(t *testing.T) {
	for _, c := range [][3]int64{{7, 60, 0}, {-1, 60, -1}, {-60, 60, -1}, {-61, 60, -2}, {60, 60, 1}, {0, 60, 0}} {
		if got := FloorDiv(c[0], c[1]); got != c[2] {
			t.Errorf("%d/%d rounded down: got %d, want %d", c[0], c[1], got, c[2])
		}
	}
	if d := at(t, "1969-12-31T00:00:00Z").Day(); d != -1 {
		t.Errorf("1969-12-31 is day %d, want -1", d)
	}
}

// one gathers values of channel "a", each under its own stamp given in seconds of minute 0 of day 0, into a row.
func one(t testing.TB, interval time.Duration, stampedValues ...any) (Column, *Block) {
	t.Helper()
	g := NewGatherer(Layout{Interval: interval, Channels: []string{"a"}})
	var b Batch
	for i := 0; i < len(stampedValues); i += 2 {
		v, ok := stampedValues[i+1].(Value)
		if !ok {
			v = Single(stampedValues[i+1].(float64))
		}
		b.Append(&Reading{At: Stamp(stampedValues[i].(int)) * MicrosPerSecond, Values: []ChannelValue{{"a", v}}})
	}
	block := NewBlock(0, 1)
	g.Fill(block, &b, 0, PerDay)
	return block.Columns[0], block
}

// TestRow holds one minute's statistics against hand-worked ones.
func TestRow(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		name         string
		in           []any
		mean, sd     float64
		lo, hi       float64
		n            uint32
		conflict     bool
		records      uint16
		toleranceAbs float64
	}{
		{"one sample", []any{0, 5.0}, 5, nan, 5, 5, 1, false, 1, 0},
		{"three samples: 1 2 3", []any{0, 1.0, 1, 2.0, 2, 3.0}, 2, 1, 1, 3, 3, false, 3, 0},
		{"an equal repeat counts once", []any{0, 1.0, 0, 1.0, 1, 2.0, 2, 3.0}, 2, 1, 1, 3, 3, false, 3, 0},
		{"of two under a stamp the lesser", []any{0, 9.0, 0, 1.0, 1, 2.0, 2, 3.0}, 2, 1, 1, 3, 3, true, 3, 0},
		{"nothing is less than minus nothing", []any{0, 0.0, 0, math.Copysign(0, -1)}, 0, nan, 0, 0, 1, false, 1, 0},
		{"the logger's own statistics", []any{0, Value{10, 2, 5, 14, 60}}, 10, 2, 5, 14, 60, false, 1, 0},
		{"means without the rest", []any{0, Value{10, nan, nan, nan, 60}}, 10, nan, 10, 10, 60, false, 1, 0},
		{"5 and {mean: 5} are the same", []any{0, 5.0, 0, Value{5, nan, nan, nan, 1}}, 5, nan, 5, 5, 1, false, 1, 0},
		{"two means of two samples each: 1 3 and 5 7", []any{0, Value{2, math.Sqrt2, 1, 3, 2}, 30, Value{6, math.Sqrt2, 5, 7, 2}},
			4, math.Sqrt(20.0 / 3), 1, 7, 4, false, 2, 1e-15},
		{"unlike counts: 1 and 4 4 4", []any{0, 1.0, 30, Value{4, 0, 4, 4, 3}}, 3.25, 1.5, 1, 4, 4, false, 2, 1e-15},
		{"a part whose spread is not known", []any{0, 1.0, 30, Value{4, nan, 4, 4, 3}}, 3.25, nan, 1, 4, 4, false, 2, 0},
		{"a spread without a count", []any{0, Value{1, 0.5, 0, 2, 1}, 30, Value{3, 0.5, 2, 4, 1}}, 2, nan, 0, 4, 2, false, 2, 0},
		{"a mark beside samples is no sample", []any{0, 1.0, 1, -7999.0, 2, 3.0}, 2, math.Sqrt2, 1, 3, 2, false, 3, 0},
		{"marks among the logger's statistics", []any{0, Value{10, -7999, -7999, 14, 60}}, 10, nan, 10, 14, 60, false, 1, 0},
		{"nothing but marks", []any{0, -6999.0, 1, -7999.0}, -7999, nan, -7999, -7999, 1, false, 2, 0},
	} {
		t.Run(c.name, func(t *testing.T) {
			col, block := one(t, time.Second, c.in...)
			same := func(what string, got, want float64) {
				if !(math.Abs(got-want) <= c.toleranceAbs*want) && !(math.IsNaN(got) && math.IsNaN(want)) {
					t.Errorf("%s: got %v, want %v", what, got, want)
				}
			}
			same("mean", col.Mean[0], c.mean)
			same("sd", col.SD[0], c.sd)
			same("min", col.Min[0], c.lo)
			same("max", col.Max[0], c.hi)
			if math.Signbit(col.Mean[0]) && c.mean == 0 {
				t.Error("mean: minus nothing")
			}
			if col.N[0] != c.n || col.Conflict[0] != c.conflict || block.Records[0] != c.records {
				t.Errorf("n %d conflict %v records %d, want %d %v %d", col.N[0], col.Conflict[0], block.Records[0], c.n, c.conflict, c.records)
			}
			if block.Rows != 1 || !math.IsNaN(col.Mean[1]) || col.N[1] != 0 {
				t.Errorf("rows %d, next mean %v n %d: a row was written that has no reading", block.Rows, col.Mean[1], col.N[1])
			}
		})
	}
}

// TestManyStamps: more stamps in a minute than a count of 16 bits holds, and counts whose sum 32 bits do not hold.
func TestManyStamps(t *testing.T) {
	g := NewGatherer(Layout{Interval: time.Second, Channels: []string{"a"}})
	b := Batch{Channels: []Channel{{Name: "a"}}}
	for i := range 70_000 {
		b.At = append(b.At, Stamp(i))
		b.Channels[0].Mean = append(b.Channels[0].Mean, float64(i%2))
	}
	block := NewBlock(0, 1)
	g.Fill(block, &b, 0, PerDay)
	if block.Records[0] != math.MaxUint16 || block.Columns[0].N[0] != 70_000 || block.Columns[0].Mean[0] != 0.5 {
		t.Errorf("records %d n %d mean %v, want 65535, 70000 and 0.5", block.Records[0], block.Columns[0].N[0], block.Columns[0].Mean[0])
	}
	col, _ := one(t, time.Second, 0, Value{1, 0, 1, 1, math.MaxInt32}, 1, Value{3, 0, 3, 3, math.MaxInt32}, 2, Value{2, 0, 2, 2, math.MaxInt32})
	if col.N[0] != math.MaxInt32 || col.Mean[0] != 2 {
		t.Errorf("n %d mean %v, want the greatest count and 2", col.N[0], col.Mean[0])
	}
}

// TestFillOnlyItsMinutes: Fill reads the minutes that it is asked for, in the block's day, and no more.
func TestFillOnlyItsMinutes(t *testing.T) {
	g := NewGatherer(Layout{Interval: time.Minute, LabelEnd: true, Channels: []string{"a"}})
	var b Batch
	for _, text := range []string{"1970-01-01T00:00:00Z", "1970-01-01T00:01:00Z", "1970-01-01T12:00:00Z", "1970-01-02T00:00:00Z", "1970-01-02T00:01:00Z"} {
		b.Append(&Reading{At: at(t, text), Values: []ChannelValue{{"a", Single(1)}, {"undeclared", Single(2)}}})
	}
	if days := g.Days(&b); len(days) != 3 || days[0] != -1 || days[2] != 1 {
		t.Errorf("days %v, want -1, 0, 1", days)
	}
	block := NewBlock(0, 1)
	g.Fill(block, &b, 0, 600)
	if block.Rows != 1 || block.Columns[0].N[0] != 1 {
		t.Errorf("rows %d after minutes 0 to 599, want 1", block.Rows)
	}
	g.Fill(block, &b, 600, PerDay)
	if block.Rows != PerDay || block.Records[719] != 1 || block.Records[1439] != 1 || block.Records[720] != 0 {
		t.Errorf("rows %d, records %d %d %d", block.Rows, block.Records[719], block.Records[1439], block.Records[720])
	}
	block.Reset(5)
	if block.Rows != 0 || block.Day != 5 || block.Records[719] != 0 || block.Columns[0].N[719] != 0 || !math.IsNaN(block.Columns[0].Mean[719]) {
		t.Error("a block that was reset remembers the day before")
	}
}

// TestStatsOnSomeRows: a batch may hold single samples and averaged values in one column.
func TestStatsOnSomeRows(t *testing.T) {
	var b Batch
	b.Append(&Reading{At: 0, Values: []ChannelValue{{"a", Single(1)}}})
	b.Append(&Reading{At: MicrosPerMinute, Values: []ChannelValue{{"a", Value{5, 0.5, 4, 6, 60}}}})
	b.Append(&Reading{At: 2 * MicrosPerMinute})
	b.Append(&Reading{At: 3 * MicrosPerMinute, Received: 7, Ahead: true, Values: []ChannelValue{{"a", Single(2)}, {"b", Single(3)}}})
	block := NewBlock(0, 2)
	NewGatherer(Layout{Interval: time.Minute, Channels: []string{"a", "b"}}).Fill(block, &b, 0, PerDay)
	a := block.Columns[0]
	if a.N[0] != 1 || !math.IsNaN(a.SD[0]) || a.N[1] != 60 || a.SD[1] != 0.5 || a.Min[1] != 4 || a.N[2] != 0 || a.N[3] != 1 || a.Max[3] != 2 {
		t.Errorf("n %v sd %v min %v", a.N[:4], a.SD[:4], a.Min[:4])
	}
	if block.Records[2] != 1 || block.Ahead[2] || !block.Ahead[3] || block.Columns[1].Mean[3] != 3 || block.Columns[1].N[0] != 0 {
		t.Errorf("records %v ahead %v", block.Records[:4], block.Ahead[:4])
	}
	r := b.Reading(1)
	if len(r.Values) != 1 || r.Values[0].Value != (Value{5, 0.5, 4, 6, 60}) || r.Received != 0 {
		t.Errorf("row 1 reads back as %+v", r)
	}
}
