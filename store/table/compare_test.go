package table

import (
	"math"
	"testing"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// compared makes rows from minute `first` on with one quantity's values and verdicts.
func compared(first int64, values []float64, verdicts []rules.Verdict, clear float64) *Table {
	n := len(values)
	blank := func() []float64 { return filled(n, math.NaN()) }
	j := &engine.Judged{Station: "a", Day: 0, Rows: n, Records: make([]uint16, n), ZenithDeg: blank(), ApparentZenithDeg: blank(), AzimuthDeg: blank(),
		ExtraterrestrialWm2: blank(), ClearGlobalWm2: filled(n, clear), ClearDirectWm2: blank(), ClearDiffuseWm2: blank(), ClearLWDownWm2: blank(),
		Series: []engine.Series{{Quantity: rules.Global, Primary: true, Measured: blank(), Value: values, SD: blank(), Min: blank(), Max: blank(),
			N: make([]uint32, n), U95: blank(), Verdict: verdicts, Missed: make([]rules.TestSet, n), Passed: make([]rules.TestSet, n),
			Faults: make([]rules.FaultSet, n)}}}
	t := FromJudged(j)
	for i := range t.Vectors[colTime].Times {
		t.Vectors[colTime].Times[i] += first * minute.MicrosPerMinute
	}
	return t
}

func TestCompareByHand(t *testing.T) {
	nan := math.NaN()
	a, q, r, x := rules.Accepted, rules.Questioned, rules.Rejected, rules.Absent
	before := compared(0, []float64{100, 200, 300, nan, 500}, []rules.Verdict{a, a, q, x, a}, 800)
	after := compared(0, []float64{100, 210, 300, 40, nan}, []rules.Verdict{a, a, r, a, x}, 800)
	changes, model := Compare(before, after)
	if len(changes) != 1 || model != 0 {
		t.Fatalf("%+v %d", changes, model)
	}
	c := changes[0]
	if c.Quantity != rules.Global || c.Minutes != 4 || c.Verdicts != 3 || c.Values != 3 || c.Both != 1 || c.Mean() != 10 || c.Largest != 10 || c.Details != 0 {
		t.Errorf("%+v", c)
	}
	if c.Moves[q][r] != 1 || c.Moves[x][a] != 1 || c.Moves[a][x] != 1 {
		t.Errorf("moves %v", c.Moves)
	}
	if changes, model = Compare(before, before); len(changes) != 0 || model != 0 {
		t.Errorf("the same: %+v %d", changes, model)
	}
	if _, model = Compare(before, compared(0, before.Find("global").Doubles, []rules.Verdict{a, a, q, x, a}, 801)); model != 5 {
		t.Errorf("clear sky in %d minutes, want 5", model)
	}
	// Rows that one of them lacks count as absent: minutes 0 and 1 go, 5 and 6 come.
	changes, _ = Compare(before, compared(2, []float64{300, nan, 500, 600, 700}, []rules.Verdict{q, x, a, a, a}, 800))
	if c = changes[0]; len(changes) != 1 || c.Minutes != 4 || c.Moves[a][x] != 2 || c.Moves[x][a] != 2 || c.Both != 0 || !math.IsNaN(c.Mean()) {
		t.Errorf("shifted: %+v", changes)
	}
	sum := SumChanges(nil, changes)
	if sum = SumChanges(sum, changes); sum[0].Minutes != 8 || sum[0].Moves[a][x] != 4 {
		t.Errorf("summed: %+v", sum)
	}
}
