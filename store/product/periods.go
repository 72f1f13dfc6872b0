package product

import (
	"math"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store/table"
)

// A Period is how long a product's rows are.
type Period uint8

// The periods of the products of means.
const (
	Hour Period = iota
	Day
	Month
)

func (p Period) String() string { return [...]string{"hour", "day", "month"}[p] }

const (
	hourMinutes    = 60
	hourMinutesMin = 48 // 80 %: common practice after WMO-No. 8 (from memory)
	dayHours       = 24
	ratioShareMin  = 0.8
	ratioMinWm2    = 20 // least mean of what a ratio divides by: common practice
)

// A mean is a period's mean of a variable and what it stands on. The parts of its expanded uncertainty are kept apart until it is stored.
type mean struct {
	value                float64 // NaN where it is withheld
	n                    int
	least, largest       float64
	sd                   float64
	correlated           float64
	sampling2, gap       float64
	questioned, rejected int
	stands, dark         bool // it stands on enough; it may be missing and counts as nothing
}

func (m *mean) u95() float64 {
	return math.Sqrt(float64(m.correlated*m.correlated) + m.sampling2 + float64(m.gap*m.gap))
}

// A quotient is a ratio of sums.
type quotient struct {
	over, under float64
	n, possible int
}

func (q *quotient) add(o *quotient) {
	q.over, q.under, q.n, q.possible = q.over+o.over, q.under+o.under, q.n+o.n, q.possible+o.possible
}

// value is the ratio, NaN where it stands on less than a share of the minutes that could have had it.
func (q *quotient) value(share, possible float64) float64 {
	if q.n == 0 || float64(q.n) < share*possible || !(q.under >= ratioMinWm2*float64(q.n)) {
		return nan
	}
	return q.over / q.under
}

// hoursOf are the means of a day's hours.
type hoursOf struct {
	rows   [dayHours]bool // the hour has a row in the minutes
	means  [dayHours][meanCount]mean
	ratios [dayHours][hourCount - meanCount]quotient
}

// spans cuts the day's rows into hours.
func (d *dayMinutes) spans() (from [dayHours + 1]int) {
	i := 0
	for h := range from {
		for i < d.rows && int(d.minuteOf[i]) < h*hourMinutes {
			i++
		}
		from[h] = i
	}
	return from
}

func (h *hoursOf) make(d *dayMinutes) {
	*h = hoursOf{}
	spans := d.spans()
	for k := range dayHours {
		from, to := spans[k], spans[k+1]
		h.rows[k] = to > from
		low := to > from
		for i := from; i < to; i++ {
			low = low && at(d.apparent, i) >= lowZenithDeg
		}
		for v := range meanCount {
			if d.present[v] {
				h.means[k][v] = d.hour(v, from, to, low)
			}
		}
		for v := range h.ratios[k] {
			h.ratios[k][v] = d.quotient(v+meanCount, from, to)
		}
	}
}

// hour is the mean of a variable over rows of one hour.
func (d *dayMinutes) hour(v, from, to int, low bool) mean {
	m := mean{value: nan, least: nan, largest: nan, sd: nan}
	of := d.of[v]
	sum := 0.0
	for i := from; i < to; i++ {
		if v < rules.QuantityCount {
			m.questioned += count(d.not[v][0][i])
			m.rejected += count(d.not[v][1][i])
		}
		x := &of[i]
		if x.value != x.value {
			continue
		}
		if m.n == 0 {
			m.least, m.largest = x.value, x.value
		}
		m.n++
		m.least, m.largest = min(m.least, x.value), max(m.largest, x.value)
		sum += x.value
		m.correlated += x.correlated
		m.sampling2 += x.sampling2
	}
	if m.n == 0 {
		m.correlated, m.dark = nan, low && variables[v].shortwave
		m.gap = d.boundOf(v, from, to)
		return m
	}
	n := float64(m.n)
	average := sum / n
	m.correlated, m.sampling2 = m.correlated/n, m.sampling2/(n*n)
	if m.n > 1 {
		squares := 0.0
		for i := from; i < to; i++ {
			if x := of[i].value; x == x {
				squares += float64((x - average) * (x - average))
			}
		}
		m.sd = math.Sqrt(squares / (n - 1))
		m.gap = coverage * m.sd * (1 - n/hourMinutes)
	}
	if m.stands = m.n >= hourMinutesMin; m.stands {
		m.value = average
	} else {
		m.dark = low && variables[v].shortwave
		m.gap = d.boundOf(v, from, to)
	}
	return m
}

// coverage makes an expanded uncertainty of a standard one.
const coverage = 2

func count(b bool) int {
	if b {
		return 1
	}
	return 0
}

// Bounds of what a shortwave quantity may be under a cloudless sky, as shares of its global: UV less than a tenth, and 2.1 umol/J of photons
// (common practice).
const (
	uvOfGlobal  = 0.1
	parOfGlobal = 2.1
)

// boundOf is what an hour that counts as nothing may have been: between nothing and the clear sky's mean, rectangular; expanded. Zero where
// there is no model.
func (d *dayMinutes) boundOf(v, from, to int) float64 {
	sky, factor := d.bound[0], 1.0
	switch v {
	case int(rules.Direct):
		sky = d.bound[1]
	case int(rules.UV):
		factor = uvOfGlobal
	case int(rules.PAR):
		factor = parOfGlobal
	}
	if v == vSunshine || sky == nil {
		return 0
	}
	sum, n := 0.0, 0
	for i := from; i < to; i++ {
		if x := sky[i]; x == x {
			sum += x
			n++
		}
	}
	if n == 0 {
		return 0
	}
	return coverage * factor * (sum / float64(n)) / math.Sqrt(3)
}

// quotient sums a ratio's parts over the minutes that have both, with the sun above 5 degrees.
func (d *dayMinutes) quotient(v, from, to int) (q quotient) {
	over, under := d.of[rules.Reflected], d.of[vShortwaveDown]
	switch v {
	case vDiffuseFraction:
		over = d.of[rules.Diffuse]
	case vClearness:
		over = d.of[vShortwaveDown]
	}
	for i := from; i < to; i++ {
		if !(at(d.apparent, i) <= lowZenithDeg) {
			continue
		}
		q.possible++
		a, b := over[i].value, under[i].value
		if v == vClearness {
			b = d.beyond[i]
		}
		if a == a && b == b {
			q.over, q.under, q.n = q.over+a, q.under+b, q.n+1
		}
	}
	return q
}

// A dayMean is a day's mean of a variable.
type dayMean struct {
	mean
	hours, dark int
}

// day is the mean of the day's hours. Hours of shortwave that are missing in the dark or near it count as nothing.
func (h *hoursOf) day(v int) dayMean {
	m := dayMean{mean: mean{value: nan, least: nan, largest: nan}}
	sum := 0.0
	for k := range dayHours {
		x := &h.means[k][v]
		m.questioned, m.rejected = m.questioned+x.questioned, m.rejected+x.rejected
		if x.n > 0 {
			if m.n == 0 {
				m.least, m.largest = x.least, x.largest
			}
			m.n += x.n
			m.least, m.largest = min(m.least, x.least), max(m.largest, x.largest)
		}
		switch {
		case x.stands:
			m.hours++
			sum += x.value
			m.correlated += x.correlated
			m.sampling2 += x.sampling2
			m.gap += x.gap
		case x.dark:
			m.dark++
			m.gap += x.gap
		}
	}
	m.correlated, m.sampling2, m.gap = m.correlated/dayHours, m.sampling2/(dayHours*dayHours), m.gap/dayHours
	if m.stands = m.hours > 0 && m.hours+m.dark == dayHours; m.stands {
		m.value = sum / dayHours
	}
	return m
}

// A sheet is a product's table while it is filled. A column without a value stays nil.
type sheet struct {
	*layout
	t *table.Table
}

func newSheet(l *layout, rows int) sheet {
	t := &table.Table{Columns: l.columns, Vectors: make([]table.Vector, len(l.columns)), Rows: rows}
	t.Vectors[0].Times = make([]int64, rows)
	return sheet{l, t}
}

func (s *sheet) setDouble(c, row int, x float64) {
	x = round(x, s.columns[c].Step)
	if x != x {
		return
	}
	s.doubles(c)[row] = x
}

// doubles gives a column's values, all null at first.
func (s *sheet) doubles(c int) []float64 {
	v := &s.t.Vectors[c]
	if v.Doubles == nil {
		v.Doubles = make([]float64, s.t.Rows)
		for i := range v.Doubles {
			v.Doubles[i] = nan
		}
	}
	return v.Doubles
}

func (s *sheet) setInt(c, row, x int) {
	v := &s.t.Vectors[c]
	if v.Ints == nil {
		v.Ints = make([]int32, s.t.Rows)
		for i := range v.Ints {
			v.Ints[i] = table.NullInt
		}
	}
	v.Ints[row] = int32(x)
}

// begin sets a row's time and length.
func (s *sheet) begin(row int, startMinute int64, minutes int) {
	s.t.Vectors[0].Times[row] = startMinute * minute.MicrosPerMinute
	s.setInt(lengthColumn, row, minutes)
}

// setMean sets what all periods say of a mean.
func (s *sheet) setMean(v, row int, m *mean) {
	at := s.at[v]
	s.setDouble(at[""], row, m.value)
	s.setInt(at["_n"], row, m.n)
	s.setDouble(at["_min"], row, m.least)
	s.setDouble(at["_max"], row, m.largest)
	if c, ok := at["_u95"]; ok && m.stands {
		s.setDouble(c, row, m.u95())
	}
	if c, ok := at["_sd"]; ok {
		s.setDouble(c, row, m.sd)
	}
	if v < rules.QuantityCount {
		s.setInt(at["_questioned"], row, m.questioned)
		s.setInt(at["_rejected"], row, m.rejected)
	}
}

func (s *sheet) setRatio(v, row int, q *quotient, share, possible float64) {
	if q.n > 0 {
		s.setDouble(s.at[v][""], row, q.value(share, possible))
		s.setInt(s.at[v]["_n"], row, q.n)
	}
}
