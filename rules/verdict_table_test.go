package rules

import "testing"

// The design names who may reject; nobody may join them by a slip in the table.
func TestOnlySomeMayReject(t *testing.T) {
	for test := Test(0); test < TestCount; test++ {
		if may := test == Signal || test == Possible; TestEffect(test) == Reject != may {
			t.Errorf("a miss of %s has the effect %s; only signal and possible reject", test, TestEffect(test))
		}
	}
	for kind := FaultKind(0); kind < FaultKindCount; kind++ {
		if got := FaultEffect(kind, Watch); got != Report {
			t.Errorf("%s to watch has the effect %s, want report", kind, got)
		}
		if got := FaultEffect(kind, Act); got == NoEffect {
			t.Errorf("%s to act on has no effect: add it to actEffects", kind)
		}
	}
}

func TestTestsEffect(t *testing.T) {
	for _, c := range []struct {
		missed TestSet
		effect Effect
		want   Verdict
	}{
		{0, NoEffect, Accepted},
		{Clock.Of(), Report, Accepted},
		{Rare.Of(), Question, Questioned},
		{Clock.Of() | Closure.Of(), Question, Questioned},
		{Rare.Of() | Possible.Of(), Reject, Rejected},
		{Local.Of(), Question, Questioned},
	} {
		if got := TestsEffect(c.missed); got != c.effect || got.Verdict() != c.want {
			t.Errorf("missed %q: %s and %s, want %s and %s", c.missed.Join(";"), got, got.Verdict(), c.effect, c.want)
		}
	}
}

func TestClosureIsOnlyReportedNearTheHorizon(t *testing.T) {
	for _, c := range []struct {
		zenithDeg float64
		want      Effect
	}{{30, Question}, {85, Question}, {85.01, Report}, {89, Report}} {
		if got := ClosureEffect(c.zenithDeg); got != c.want {
			t.Errorf("closure at %g degrees: %s, want %s", c.zenithDeg, got, c.want)
		}
	}
}
