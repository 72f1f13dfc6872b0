package rules

import (
	"strings"
	"testing"
)

// Every kind has a page that is whole: what it looks like, each neighbour of the catalogue and how it is told from it, what to do, and the
// caution that the work needs.
func TestEveryKindHasAPage(t *testing.T) {
	for k := range FaultKind(FaultKindCount) {
		e, p := k.Entry(), PageOf(k)
		if len(p.Told) != len(e.ConfusedWith) {
			t.Errorf("%s: told from %d neighbours, the catalogue has %d", k, len(p.Told), len(e.ConfusedWith))
			continue
		}
		text := k.Explain()
		for _, want := range append([]string{k.String(), e.Title, e.Looks, e.Seen, e.Reaches, e.Work(), p.Take, e.Caution()}, p.Told...) {
			if !strings.Contains(text, want) {
				t.Errorf("%s: its page lacks %q", k, want)
			}
		}
		for i, other := range e.ConfusedWith {
			if !strings.Contains(text, "- "+other.String()+": "+p.Told[i]) {
				t.Errorf("%s: its page does not say how it is told from %s", k, other)
			}
			if told := p.Told[i]; len(told) < 20 || !strings.HasSuffix(told, ".") {
				t.Errorf("%s from %s: %q is no sentence", k, other, told)
			}
		}
		if len(p.Take) < 5 || !strings.HasSuffix(p.Take, ".") || strings.HasPrefix(p.Take, " ") {
			t.Errorf("%s: take along %q", k, p.Take)
		}
		for _, word := range strings.Fields(e.Advice) {
			if !strings.Contains(e.Work()+" "+e.Caution(), word) {
				t.Errorf("%s: %q of its advice stands neither in the work nor in the caution", k, word)
			}
		}
		if strings.Contains(text, "  ") || strings.Contains(text, "..") {
			t.Errorf("%s: its page has a slip of the pen:\n%s", k, text)
		}
	}
}

// A kind that is easily taken for another stands on that one's page.
func TestKindsLeadToEachOther(t *testing.T) {
	led := FaultSet(0)
	for k := range FaultKind(FaultKindCount) {
		for _, other := range k.Entry().ConfusedWith {
			led |= other.Of()
		}
	}
	for _, k := range []FaultKind{DomeFouled, VentilationLost, SensitivityDrift, DomeSoiled, SensitivityWrong, PointingLost, Shadow} {
		if !led.Has(k) {
			t.Errorf("%s stands on no other's page", k)
		}
	}
}
