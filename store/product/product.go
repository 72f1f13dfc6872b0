package product

import (
	"time"

	"fluxwarden/qc/minute"
	"fluxwarden/qc/radiation"
	"fluxwarden/store/table"
)

// Products are what is made of some judged minutes of a station. Month is nil where they are not a whole month's.
type Products struct {
	Minutes, Hours, Days, Month *table.Table
}

// Make makes the products of judged minutes, whose rows are sorted by time. With month they are all that there is of one calendar month,
// and its mean is made too.
func Make(t *table.Table, s Settings, month bool) Products {
	times := t.Find("time").Times
	var starts []int // of the days' rows
	for i := range times {
		if i == 0 || minute.Stamp(times[i]).Day() != minute.Stamp(times[i-1]).Day() {
			starts = append(starts, i)
		}
	}
	starts = append(starts, len(times))
	m := newMaker(t, len(starts)-1, s)
	for k := range len(starts) - 1 {
		m.day(k, starts[k], starts[k+1])
	}
	p := Products{Minutes: m.minutes.t, Hours: m.hours.t, Days: m.days.t}
	cut(p.Hours, m.hourRows)
	if month && len(times) > 0 {
		p.Month = m.month(minute.Stamp(times[0]).Day())
	}
	return p
}

type maker struct {
	reader               *reader
	settings             Settings
	minutes, hours, days sheet
	buffer               *dayMinutes
	hoursOf              *hoursOf
	sum                  *monthSum
	hourRows             int
}

func newMaker(t *table.Table, days int, s Settings) *maker {
	m := &maker{reader: newReader(t), settings: s, minutes: newSheet(minuteLayout, t.Rows), hours: newSheet(hourLayout, days*dayHours), days: newSheet(dayLayout, days),
		buffer: newDayMinutes(), hoursOf: &hoursOf{}, sum: &monthSum{}}
	copy(m.minutes.t.Vectors[0].Times, m.reader.times)
	if m.reader.zenith != nil {
		m.minutes.t.Vectors[zenithColumn].Doubles = m.reader.zenith
	}
	return m
}

// day makes what is made of one day, rows from..to of the table.
func (m *maker) day(row, from, to int) {
	d, h := m.buffer, m.hoursOf
	d.read(m.reader, from, to, m.settings)
	m.writeMinutes(from)
	h.make(d)
	start := minute.Stamp(m.reader.times[from]).Day() * minute.PerDay
	for k := range dayHours {
		if !h.rows[k] {
			continue
		}
		m.hours.begin(m.hourRows, start+int64(k*hourMinutes), hourMinutes)
		for v := range meanCount {
			if d.present[v] {
				m.hours.setMean(v, m.hourRows, &h.means[k][v])
			}
		}
		for v := range h.ratios[k] {
			q := &h.ratios[k][v]
			m.hours.setRatio(v+meanCount, m.hourRows, q, ratioShareMin, float64(q.possible))
		}
		m.hourRows++
	}
	m.days.begin(row, start, minute.PerDay)
	var means [meanCount]dayMean
	for v := range meanCount {
		if !d.present[v] {
			continue
		}
		x := h.day(v)
		means[v] = x
		m.days.setMean(v, row, &x.mean)
		m.days.setInt(dayLayout.at[v]["_hours"], row, x.hours)
		if variables[v].shortwave {
			m.days.setInt(dayLayout.at[v]["_hours_dark"], row, x.dark)
		}
	}
	for v := range hourCount - meanCount {
		var q quotient
		for k := range dayHours {
			q.add(&h.ratios[k][v])
		}
		m.days.setRatio(v+meanCount, row, &q, ratioShareMin, float64(q.possible))
	}
	m.sum.add(d, h, &means)
}

// sourceWords are the dictionary of shortwave_down_source.
var sourceWords = []string{"parts", "global"}

func (m *maker) writeMinutes(from int) {
	d, t := m.buffer, m.minutes.t
	for v := range variableCount {
		if !d.present[v] {
			continue
		}
		values, of := m.minutes.doubles(minuteLayout.at[v][""]), d.of[v][:d.rows]
		for i := range of { // rounded already
			values[from+i] = of[i].value
		}
		if !variables[v].uncertain {
			continue
		}
		u95 := m.minutes.doubles(minuteLayout.at[v]["_u95"])
		for i := range of {
			if of[i].value == of[i].value {
				u95[from+i] = round(of[i].u95(), table.StepSpread)
			}
		}
	}
	source := &t.Vectors[sourceColumn]
	for i, s := range d.source[:d.rows] {
		if s == radiation.FromNothing {
			continue
		}
		if source.Codes == nil {
			source.Dict, source.Codes = sourceWords, make([]int32, t.Rows)
			for k := range source.Codes {
				source.Codes[k] = table.NullCode
			}
		}
		source.Codes[from+i] = int32(s - radiation.FromParts)
	}
}

// month makes the month's row. day is one of its days.
func (m *maker) month(day int64) *table.Table {
	at := time.Unix(day*86400, 0).UTC()
	first := time.Date(at.Year(), at.Month(), 1, 0, 0, 0, 0, time.UTC)
	m.sum.days = int(first.AddDate(0, 1, 0).Sub(first).Hours()) / 24
	s := newSheet(monthLayout, 1)
	s.begin(0, first.Unix()/60, m.sum.days*minute.PerDay)
	for v := range meanCount {
		if m.sum.of[v] == nil {
			continue
		}
		x, enough := m.sum.mean(v)
		s.setMean(v, 0, &x)
		s.setInt(monthLayout.at[v]["_days"], 0, m.sum.of[v].daysWithMean)
		s.setInt(monthLayout.at[v]["_quarters"], 0, enough)
	}
	for v := range m.sum.ratios {
		q := &m.sum.ratios[v]
		s.setRatio(v+meanCount, 0, q, ratioShareOfMonth, float64(q.possible)*float64(m.sum.days)/float64(m.sum.with))
	}
	return s.t
}

// cut takes the rows off that were not filled.
func cut(t *table.Table, rows int) {
	*t = *t.Cut(0, rows)
}
