package worker

import (
	"fluxwarden/qc/engine"
	"fluxwarden/qc/minute"
)

// sparesMax bounds the days' columns that are kept for use again. A day is a megabyte or two.
const sparesMax = 16

// spares keeps columns that are no longer in use, by the plan that they were made for, without its notes.
type spares struct {
	blocks map[*engine.Plan][]*minute.Block
	judged map[*engine.Plan][]*engine.Judged
	count  int
}

func newSpares() *spares {
	return &spares{blocks: map[*engine.Plan][]*minute.Block{}, judged: map[*engine.Plan][]*engine.Judged{}}
}

func (s *spares) block(plan *engine.Plan, day int64, channels int) *minute.Block {
	if list := s.blocks[plan.Base()]; len(list) > 0 {
		b := list[len(list)-1]
		s.blocks[plan.Base()] = list[:len(list)-1]
		s.count--
		b.Reset(day)
		return b
	}
	return minute.NewBlock(day, channels)
}

func (s *spares) judgedFor(plan *engine.Plan, day int64) *engine.Judged {
	if list := s.judged[plan.Base()]; len(list) > 0 {
		j := list[len(list)-1]
		s.judged[plan.Base()] = list[:len(list)-1]
		s.count--
		plan.Reset(j, day)
		return j
	}
	return plan.NewJudged(day)
}

func (s *spares) takeBlock(plan *engine.Plan, b *minute.Block) {
	if b != nil {
		s.room()
		s.blocks[plan.Base()] = append(s.blocks[plan.Base()], b)
	}
}

func (s *spares) takeJudged(plan *engine.Plan, j *engine.Judged) {
	if j != nil {
		s.room()
		s.judged[plan.Base()] = append(s.judged[plan.Base()], j)
	}
}

// room drops all where there is no room for one more: what is asked for most is soon there again.
func (s *spares) room() {
	if s.count >= sparesMax {
		clear(s.blocks)
		clear(s.judged)
		s.count = 0
	}
	s.count++
}
