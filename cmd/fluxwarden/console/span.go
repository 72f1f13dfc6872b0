package console

import (
	"math"
	"slices"
	"strings"

	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/table"
)

// A span is a stretch of a station's minutes in dense columns: one place a minute, whether it is there or not.
type span struct {
	from, to int64 // minutes since 1970, to not included
	have     []bool
	rows     int
	numbers  map[string][]float64 // NaN where there is none
	words    map[string][]string  // empty where there is none
}

// readSpan reads the columns named. A column that the archive's files do not have is left out.
func readSpan(a library, station string, from, to int64, columns []string) (*span, error) {
	n := int(to - from)
	s := &span{from: from, to: to, have: make([]bool, n), numbers: map[string][]float64{}, words: map[string][]string{}}
	err := a.minutes(station, from, to, columns, func(rows *store.Rows) error {
		s.rows += rows.Rows
		places := make([]int, rows.Rows)
		for i := range places {
			places[i] = int(rows.Minute(i) - from)
			s.have[places[i]] = true
		}
		for _, name := range columns {
			if v := rows.Find(name); v != nil {
				s.take(name, v, places)
			}
		}
		return nil
	})
	return s, err
}

func (s *span) take(name string, v *table.Vector, places []int) {
	switch {
	case v.Doubles != nil:
		into := s.numbers[name]
		if into == nil {
			into = blank(len(s.have))
			s.numbers[name] = into
		}
		for i, p := range places {
			into[p] = v.Doubles[i]
		}
	case v.Ints != nil:
		into := s.numbers[name]
		if into == nil {
			into = blank(len(s.have))
			s.numbers[name] = into
		}
		for i, p := range places {
			into[p] = float64(v.Ints[i])
		}
	case v.Codes != nil:
		into := s.words[name]
		if into == nil {
			into = make([]string, len(s.have))
			s.words[name] = into
		}
		for i, p := range places {
			if c := v.Codes[i]; c != table.NullCode {
				into[p] = v.Dict[c]
			}
		}
	}
}

func blank(n int) []float64 {
	x := make([]float64, n)
	for i := range x {
		x[i] = math.NaN()
	}
	return x
}

// number is a column, all NaN if the archive has none.
func (s *span) number(name string) []float64 {
	if x := s.numbers[name]; x != nil {
		return x
	}
	return blank(len(s.have))
}

// has says whether a column has any value.
func (s *span) has(name string) bool {
	return slices.ContainsFunc(s.numbers[name], func(x float64) bool { return x == x })
}

// verdicts gives a quantity's verdicts, rules.Absent where there is no minute.
func (s *span) verdicts(q rules.Quantity) []rules.Verdict {
	out := make([]rules.Verdict, len(s.have))
	words := s.words[q.String()+"_verdict"]
	for i := range out {
		out[i] = rules.Absent
		if words != nil {
			if v, ok := rules.ParseVerdict(words[i]); ok {
				out[i] = v
			}
		}
	}
	return out
}

// quantities are those that have a verdict in the span, in the order of rules.
func (s *span) quantities(of []rules.Quantity) []rules.Quantity {
	var list []rules.Quantity
	for _, q := range of {
		if words := s.words[q.String()+"_verdict"]; slices.ContainsFunc(words, func(w string) bool { return w != "" }) {
			list = append(list, q)
		}
	}
	return list
}

// radiation and weather are the quantities by sort.
func radiation() []rules.Quantity { return quantityRange(0, rules.RadiationCount) }
func weather() []rules.Quantity {
	return quantityRange(rules.RadiationCount, rules.QuantityCount)
}

func quantityRange(from, to int) []rules.Quantity {
	var list []rules.Quantity
	for q := from; q < to; q++ {
		list = append(list, rules.Quantity(q))
	}
	return list
}

// inWords is a quantity's name for people.
func inWords(q rules.Quantity) string {
	return strings.ReplaceAll(strings.Replace(q.String(), "lw_", "longwave_", 1), "_", " ")
}
