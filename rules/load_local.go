package rules

import (
	"fmt"

	"gopkg.in/yaml.v3"
)

// localTests compiles the tests in CEL that hold for a station: the network's, then its own.
func (r *reader) localTests(st *Station, sections ...*value) {
	names := st.LocalNames()
	seen := map[string]int{}
	for _, section := range sections {
		tests := section.at("tests")
		if tests == nil {
			continue
		}
		for _, v := range tests.items {
			if !v.ok || !v.given("name") || !v.given("miss") || !v.given("of") {
				continue
			}
			t := LocalTest{Name: v.at("name").text, Miss: v.at("miss").text, Line: v.node.Line}
			for _, q := range v.at("of").items {
				if of, known := ParseQuantity(q.text); known && q.ok {
					t.Of = append(t.Of, of)
				}
			}
			if first := seen[t.Name]; first > 0 {
				r.problem(v.at("name").node, "give each test its own name", "station %s has two tests %s, the first on line %d", st.ID, t.Name, first)
			}
			seen[t.Name] = t.Line
			var wrong *localTrouble
			if len(t.Miss) > localBytesMax {
				wrong = &localTrouble{1, 1, fmt.Sprintf("the expression has %d bytes", len(t.Miss)), fmt.Sprintf("keep it under %d, or make two tests of it", localBytesMax)}
			} else {
				t.Check, wrong = r.local.compile(names, t.Miss)
			}
			if wrong != nil {
				r.localProblem(v.at("miss").node, st, &t, wrong)
				continue
			}
			st.Local = append(st.Local, t)
		}
	}
	if len(st.Local) > LocalTestsMax {
		r.problem(sections[len(sections)-1].at("tests").node, fmt.Sprintf("keep %d, the network's with them", LocalTestsMax), "station %s has %d tests of its own and the network's",
			st.ID, len(st.Local))
	}
}

// localProblem notes what is wrong with an expression, where it is in the file. One of the network's is said once, not for every station.
func (r *reader) localProblem(n *yaml.Node, st *Station, t *LocalTest, wrong *localTrouble) {
	if r.refused[n] {
		return
	}
	if r.refused == nil {
		r.refused = map[*yaml.Node]bool{}
	}
	r.refused[n] = true
	at := *n
	if at.Line += wrong.line - 1; n.Style&(yaml.LiteralStyle|yaml.FoldedStyle) != 0 {
		at.Line++ // the text begins below the | or >
	} else if wrong.line == 1 {
		if at.Column += wrong.column - 1; n.Style&(yaml.DoubleQuotedStyle|yaml.SingleQuotedStyle) != 0 {
			at.Column++
		}
	}
	r.problem(&at, wrong.mend, "station %s test %s: %s", st.ID, t.Name, wrong.what)
}
