package engine

import (
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// settleNotes applies what people have said, last of all: a person's override holds over tests and faults. What is not there stays absent.
func settleNotes(plan *Plan, j *Judged) {
	first := j.Day * minute.PerDay
	for _, k := range plan.notes.Reaching(first, first+int64(j.Rows)) {
		n, span := plan.notes.Note(k)
		if n.Kind == rules.Remark {
			continue
		}
		lo, hi := int(max(span.From-first, 0)), int(min(span.To-first, int64(j.Rows)))
		for i := range j.Series {
			if s := &j.Series[i]; n.Concerns(s.Instrument, s.Quantity) {
				settleNote(s, n, lo, hi)
			}
		}
	}
}

func settleNote(s *Series, n *rules.Note, lo, hi int) {
	effect := rules.NoteEffect(n.Kind)
	override, _ := rules.ParseVerdict(n.Verdict)
	for r := lo; r < hi; r++ {
		s.Notes[r] |= n.Kind.Of()
		switch {
		case s.Verdict[r] == rules.Absent:
		case n.Kind == rules.Override:
			s.Verdict[r] = override
		default:
			s.Verdict[r] = max(s.Verdict[r], effect.Verdict())
		}
	}
}
