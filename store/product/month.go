package product

import (
	"math"

	"fluxwarden/qc/minute"
)

const (
	quarters          = 96
	quarterMinutes    = minute.PerDay / quarters
	quarterShareMin   = 0.2 // Roesch et al. 2011
	daysMissingMax    = 9   // World Radiation Data Centre: not from ten days missing on
	ratioShareOfMonth = quarterShareMin
)

// A quarter sums one quarter of an hour of the day over all days of a month; mean and squares after Welford 1962 (from memory).
type quarter struct {
	n                     int
	mean, squares         float64
	correlated, sampling2 float64
}

// A monthSum gathers a month, a day after the other.
type monthSum struct {
	days   int // of the month
	with   int // that have rows
	of     [meanCount]*variableSum
	ratios [hourCount - meanCount]quotient
	rowsIn [quarters]int
	litIn  [quarters]bool // some minute of it is not night
}

type variableSum struct {
	quarters       [quarters]quarter
	n, questioned  int
	rejected       int
	least, largest float64
	daysWithMean   int
	daysWithSome   int
}

func (m *monthSum) add(d *dayMinutes, h *hoursOf, means *[meanCount]dayMean) {
	m.with++
	for i := range d.rows {
		k := int(d.minuteOf[i]) / quarterMinutes
		m.rowsIn[k]++
		m.litIn[k] = m.litIn[k] || !(at(d.zenith, i) > nightZenithDeg)
	}
	for v := range meanCount {
		if d.present[v] {
			if m.of[v] == nil {
				m.of[v] = &variableSum{least: nan, largest: nan}
			}
			m.of[v].add(d, v, &means[v])
		}
	}
	for v := range m.ratios {
		for k := range dayHours {
			m.ratios[v].add(&h.ratios[k][v])
		}
	}
}

func (s *variableSum) add(d *dayMinutes, v int, day *dayMean) {
	s.questioned, s.rejected = s.questioned+day.questioned, s.rejected+day.rejected
	s.daysWithMean += count(day.stands)
	if day.n == 0 {
		return
	}
	if s.n == 0 {
		s.least, s.largest = day.least, day.largest
	}
	s.n += day.n
	s.daysWithSome++
	s.least, s.largest = min(s.least, day.least), max(s.largest, day.largest)
	for i := range d.rows {
		x := &d.of[v][i]
		if x.value != x.value {
			continue
		}
		q := &s.quarters[int(d.minuteOf[i])/quarterMinutes]
		q.n++
		off := x.value - q.mean
		q.mean += off / float64(q.n)
		q.squares += float64(off * (x.value - q.mean))
		q.correlated += x.correlated
		q.sampling2 += x.sampling2
	}
}

// mean is the month's mean of a variable, and how many quarters have enough.
func (m *monthSum) mean(v int) (out mean, enough int) {
	s := m.of[v]
	out = mean{value: nan, n: s.n, least: s.least, largest: s.largest, questioned: s.questioned, rejected: s.rejected}
	sum, dark := 0.0, 0
	whole := float64(quarterMinutes * m.days)
	for k := range s.quarters {
		q := &s.quarters[k]
		n := float64(q.n)
		if !(n >= quarterShareMin*whole) {
			dark += count(variables[v].shortwave && !m.litIn[k] && float64(m.rowsIn[k]) >= quarterShareMin*whole)
			continue
		}
		enough++
		sum += q.mean
		out.correlated += q.correlated / n
		out.sampling2 += q.sampling2 / (n * n)
		if q.n > 1 {
			sd := math.Sqrt(q.squares / (n - 1))
			out.gap += coverage * sd * math.Sqrt(max(0, quarterMinutes/n-1/float64(m.days)))
		}
	}
	out.correlated, out.sampling2, out.gap = out.correlated/quarters, out.sampling2/(quarters*quarters), out.gap/quarters
	out.stands = enough > 0 && enough+dark == quarters && m.days-s.daysWithSome <= daysMissingMax
	if out.stands {
		out.value = sum / quarters
	}
	return out, enough
}
