package table

import (
	"bytes"
	"fmt"
	"math"
	"testing"

	"pgregory.net/rapid"
)

// drawTable draws a table of every kind of column with every pattern of nulls: none, all, runs, alternating, by chance.
func drawTable(t *rapid.T) *Table {
	n := rapid.IntRange(0, 300).Draw(t, "rows")
	tab := &Table{Rows: n, Meta: map[string]string{"a": rapid.String().Draw(t, "meta")},
		Columns: []Column{{Name: "time", Kind: Time, Required: true}}, Vectors: []Vector{{Times: make([]int64, n)}}}
	at := rapid.Int64Range(-1e15, 1e15).Draw(t, "start")
	for i := range n {
		at += rapid.Int64Range(0, 1e9).Draw(t, "step")
		tab.Vectors[0].Times[i] = at
	}
	for k := range rapid.IntRange(0, 6).Draw(t, "columns") {
		c := Column{Name: fmt.Sprint("c", k), Kind: Kind(rapid.IntRange(0, 3).Draw(t, "kind"))}
		pattern := rapid.IntRange(0, 5).Draw(t, "nulls")
		null := func(i int) bool {
			return pattern == 1 || pattern == 2 && i%2 == 0 || pattern == 3 && i/17%2 == 0 || pattern == 4 && i < n-1 || pattern == 5 && rapid.Bool().Draw(t, "null")
		}
		var v Vector
		for i := range n {
			v.draw(t, c.Kind, null(i))
		}
		tab.Columns, tab.Vectors = append(tab.Columns, c), append(tab.Vectors, v)
	}
	return tab
}

func (v *Vector) draw(t *rapid.T, k Kind, null bool) {
	switch {
	case k == Time && null:
		v.Times = append(v.Times, NullTime)
	case k == Time:
		v.Times = append(v.Times, rapid.Int64Range(math.MinInt64+1, math.MaxInt64).Draw(t, "time"))
	case k == Double && null:
		v.Doubles = append(v.Doubles, math.NaN())
	case k == Double:
		v.Doubles = append(v.Doubles, rapid.Float64().Draw(t, "double"))
	case k == Int && null:
		v.Ints = append(v.Ints, NullInt)
	case k == Int:
		v.Ints = append(v.Ints, rapid.Int32Range(math.MinInt32+1, math.MaxInt32).Draw(t, "int"))
	case null:
		v.Codes = append(v.Codes, NullCode)
	default:
		v.Codes = append(v.Codes, v.code(rapid.SampledFrom([]string{"", "a", "spike;closure", "°", "x\x00y"}).Draw(t, "text")))
	}
}

// cell gives a value in a form that can be compared.
func cell(v *Vector, k Kind, i int) string {
	switch {
	case k == Time && v.Times != nil && v.Times[i] != NullTime:
		return fmt.Sprint(v.Times[i])
	case k == Double && v.Doubles != nil && isValue(v.Doubles[i]):
		return fmt.Sprintf("%016x", math.Float64bits(v.Doubles[i]))
	case k == Int && v.Ints != nil && v.Ints[i] != NullInt:
		return fmt.Sprint(v.Ints[i])
	case k == Text && v.Codes != nil && v.Codes[i] != NullCode:
		return fmt.Sprintf("%q", v.Dict[v.Codes[i]])
	}
	return "null"
}

func TestWhatIsWrittenIsRead(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		want := drawTable(t)
		b, err := Encode(want)
		if err != nil {
			t.Fatal(err)
		}
		got, err := Read(bytes.NewReader(b), int64(len(b)), nil)
		if err != nil {
			t.Fatal(err)
		}
		if got.Rows != want.Rows || len(got.Columns) != len(want.Columns) || got.Meta["a"] != want.Meta["a"] {
			t.Fatalf("read %d rows of %d columns, meta %q", got.Rows, len(got.Columns), got.Meta["a"])
		}
		for k := range want.Columns {
			for i := range want.Rows {
				a, b := cell(&want.Vectors[k], want.Columns[k].Kind, i), cell(&got.Vectors[k], got.Columns[k].Kind, i)
				if a != b || got.Columns[k].Name != want.Columns[k].Name {
					t.Fatalf("column %d row %d: wrote %s, read %s", k, i, a, b)
				}
			}
		}
	})
}

// A file of several row groups is put together again.
func TestRowGroups(t *testing.T) {
	n := RowGroupRows + 1234
	tab := &Table{Rows: n, Columns: []Column{{Name: "time", Kind: Time, Required: true}, {Name: "x", Kind: Double}}, Vectors: []Vector{{Times: make([]int64, n)}, {Doubles: make([]float64, n)}}}
	for i := range n {
		tab.Vectors[0].Times[i], tab.Vectors[1].Doubles[i] = int64(i), float64(i%1000)
	}
	b, err := Encode(tab)
	if err != nil {
		t.Fatal(err)
	}
	got, err := Read(bytes.NewReader(b), int64(len(b)), nil)
	if err != nil || got.Rows != n {
		t.Fatalf("%v", err)
	}
	for i := range n {
		if got.Vectors[0].Times[i] != int64(i) || got.Vectors[1].Doubles[i] != float64(i%1000) {
			t.Fatalf("row %d: %v %v", i, got.Vectors[0].Times[i], got.Vectors[1].Doubles[i])
		}
	}
}

func TestRound(t *testing.T) {
	for _, c := range []struct{ x, step, want float64 }{
		{0.0078125, StepIrradiance, 0},        // half a step: to even
		{0.0234375, StepIrradiance, 0.03125},  // one and a half: to even
		{-0.001, StepIrradiance, 0},           // not minus nothing
		{1013.25, StepPressure, 1013.25},      //
		{1e300, StepIrradiance, 1e300},        // the step does not matter
		{400.01, StepIrradiance, 400.015625},  //
		{-12.3456, StepAngle, -12.345703125},  //
		{math.Inf(1), StepSpread, math.NaN()}, // null
		{math.NaN(), StepSpread, math.NaN()},  //
	} {
		for _, got := range []float64{Round(c.x, c.step), roundFast(c.x, c.step, 1/c.step)} {
			if math.Float64bits(got) != math.Float64bits(c.want) && !(got != got && c.want != c.want) {
				t.Errorf("%v at %v: %v, want %v", c.x, c.step, got, c.want)
			}
		}
	}
}

// TestDamagedFilesDoNotPanic flips, cuts and empties a file everywhere. Page headers have no checksum, so a flip may pass unseen here: the archive's
// sha256 finds it. What counts is that nothing panics.
func TestDamagedFilesDoNotPanic(t *testing.T) {
	tab := NewMinutes(5)
	tab.Vectors[2].Doubles = []float64{1, 2, math.NaN(), 4, 5}
	b, err := Encode(tab)
	if err != nil {
		t.Fatal(err)
	}
	step := max(1, len(b)/1500)
	for i := 0; i < len(b); i += step {
		bad := bytes.Clone(b)
		bad[i] ^= 1 << (i % 8)
		_, _ = Read(bytes.NewReader(bad), int64(len(bad)), nil)
		if _, err := Read(bytes.NewReader(b[:i]), int64(i), nil); err == nil {
			t.Errorf("a file cut at %d of %d bytes was read", i, len(b))
		}
	}
}
