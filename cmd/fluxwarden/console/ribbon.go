package console

import (
	"fmt"
	"html"
	"html/template"
	"strings"

	"fluxwarden/rules"
)

// verdictClass names how a verdict is drawn: a pattern as well as a colour.
func verdictClass(v rules.Verdict) string { return "v-" + v.String() }

// ribbon draws verdicts as bars of one height, equal neighbours in one.
func ribbon(name string, verdicts []rules.Verdict, left, width, y, height float64) string {
	var b strings.Builder
	name = html.EscapeString(name)
	scale := width / float64(max(len(verdicts), 1))
	fmt.Fprintf(&b, `<text class="ty" x="%s" y="%s">%s</text>`, short(left-5), short(y+height-1), name)
	for i := 0; i < len(verdicts); {
		n := i + 1
		for n < len(verdicts) && verdicts[n] == verdicts[i] {
			n++
		}
		for _, part := range [...]string{`<rect class="`, verdictClass(verdicts[i]), `" x="`, short(left + float64(i)*scale), `" y="`, short(y), `" width="`,
			short(max(float64(n-i)*scale, 0.3)), `" height="`, short(height), `"><title>`, name, " ", verdicts[i].String(), `</title></rect>`} {
			b.WriteString(part)
		}
		i = n
	}
	return b.String()
}

// patterns are the fillings that tell verdicts apart without colour; once a page.
const patterns template.HTML = `<svg class="patterns" aria-hidden="true"><defs>` +
	`<pattern id="questioned" width="6" height="6" patternUnits="userSpaceOnUse" patternTransform="rotate(45)"><rect class="ground" width="6" height="6"/><rect class="stripe" width="2.4" height="6"/></pattern>` +
	`<pattern id="rejected" width="5" height="5" patternUnits="userSpaceOnUse"><rect class="ground" width="5" height="5"/><path class="stripe" d="M0 0L5 5M5 0L0 5"/></pattern>` +
	`</defs></svg>`

// A cell is a part of a day or two of one quantity's minutes: how many of each verdict.
type cell [rules.VerdictCount]int32

// worst is the verdict that a cell is drawn by: the gravest that a tenth of its minutes have, so that one odd minute does not paint half an hour.
func (c *cell) worst() rules.Verdict {
	total := int32(0)
	for _, n := range c {
		total += n
	}
	for _, v := range []rules.Verdict{rules.Rejected, rules.Questioned, rules.Absent} {
		if total > 0 && 10*c[v] >= total {
			return v
		}
	}
	if c[rules.Accepted] > 0 {
		return rules.Accepted
	}
	return rules.Absent
}
