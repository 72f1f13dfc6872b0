package rules

import (
	"slices"
	"strings"
	"testing"
)

func TestCatalogueIsComplete(t *testing.T) {
	for kind := FaultKind(0); kind < FaultKindCount; kind++ {
		e := kind.Entry()
		if e.Kind != kind {
			t.Errorf("the entry of %s is of %s", kind, e.Kind)
		}
		for name, text := range map[string]string{"Looks": e.Looks, "Seen": e.Seen, "Reaches": e.Reaches, "Advice": e.Advice} {
			if len(text) < 15 || len(text) > 320 || !strings.HasSuffix(text, ".") || strings.Contains(text, "  ") {
				t.Errorf("%s: %s is not one to three plain sentences: %q", kind, name, text)
			}
		}
		if e.Title == "" || len(e.Title) > 40 || strings.HasSuffix(e.Title, ".") {
			t.Errorf("%s: title %q is not a few words", kind, e.Title)
		}
		if len(e.ConfusedWith) < 2 || slices.Contains(e.ConfusedWith, kind) {
			t.Errorf("%s: confused with %v; name two neighbours at least, and not itself", kind, e.ConfusedWith)
		}
		seen := map[FaultKind]bool{}
		for _, other := range e.ConfusedWith {
			if seen[other] {
				t.Errorf("%s: names %s twice", kind, other)
			}
			seen[other] = true
		}
	}
	if len(Catalogue()) != FaultKindCount {
		t.Errorf("the catalogue has %d entries, want %d", len(Catalogue()), FaultKindCount)
	}
}

// Work at a tracker or in the beam can blind and burn; the advice says so.
func TestAdviceCarriesItsCaution(t *testing.T) {
	for kind, caution := range map[FaultKind]string{PointingLost: cautionBeam, ShadeOff: cautionBeam, DomeSoiled: cautionBeam, SensorTilted: cautionHeight,
		DomeSnow: cautionHeight, VentilationLost: cautionMains, DataGap: cautionMains} {
		if !strings.Contains(kind.Entry().Advice, caution) {
			t.Errorf("the advice of %s lacks its caution:%s", kind, caution)
		}
	}
}

// A value can be restored only from faults whose effect is a known number: a sign, a factor, an exchange or an offset.
func TestRestorableKinds(t *testing.T) {
	want := []FaultKind{PolarityReversed, UnitSlip, ChannelsSwapped, SensitivityWrong, SensitivityDrift, ZeroOffset}
	for kind := FaultKind(0); kind < FaultKindCount; kind++ {
		if got := kind.Entry().Restorable; got != slices.Contains(want, kind) {
			t.Errorf("%s: restorable is %v", kind, got)
		}
	}
}

func TestNamesRoundTrip(t *testing.T) {
	for k := FaultKind(0); k < FaultKindCount; k++ {
		if got, ok := ParseFaultKind(k.String()); !ok || got != k {
			t.Errorf("fault kind %d does not come back from %q", k, k)
		}
	}
	for test := Test(0); test < TestCount; test++ {
		if got, ok := ParseTest(test.String()); !ok || got != test {
			t.Errorf("test %d does not come back from %q", test, test)
		}
	}
	for q := Quantity(0); q < QuantityCount; q++ {
		if got, ok := ParseQuantity(q.String()); !ok || got != q || q.Unit() == "" {
			t.Errorf("quantity %d does not come back from %q", q, q)
		}
	}
	for v := Verdict(0); v < VerdictCount; v++ {
		if got, ok := ParseVerdict(v.String()); !ok || got != v {
			t.Errorf("verdict %d does not come back from %q", v, v)
		}
	}
	if _, ok := ParseTest("no such"); ok {
		t.Error("an unknown test is found")
	}
}
