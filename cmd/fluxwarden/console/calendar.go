package console

import (
	"fmt"
	"html/template"
	"net/http"
	"net/url"
	"slices"
	"strconv"
	"strings"
	"time"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// A dayCount is how many minutes of a day are there and how many of those are accepted, over the station's radiation quantities.
type dayCount struct{ expected, present, accepted int }

// countDays counts the days of a stretch from the verdict columns alone.
func (c *Console) countDays(station string, fromDay, toDay int64) ([]dayCount, []rules.Quantity, error) {
	out := make([]dayCount, toDay-fromDay)
	columns := []string{"time"}
	for _, q := range radiation() {
		columns = append(columns, q.String()+"_verdict")
	}
	var seen []rules.Quantity
	for day := fromDay; day < toDay; day += 31 {
		end := min(day+31, toDay)
		s, err := readSpan(c.archive, station, day*minute.PerDay, end*minute.PerDay, columns)
		if err != nil {
			return nil, nil, err
		}
		for _, q := range s.quantities(radiation()) {
			if !slices.Contains(seen, q) {
				seen = append(seen, q)
			}
			for i, v := range s.verdicts(q) {
				d := &out[day-fromDay+int64(i)/minute.PerDay]
				d.expected++
				if v != rules.Absent {
					d.present++
				}
				if v == rules.Accepted {
					d.accepted++
				}
			}
		}
	}
	return out, seen, nil
}

// soundness sorts a day into the classes that the calendar draws: by the share of what is there that is accepted.
func (d *dayCount) class() string {
	switch share := float64(d.accepted) / float64(max(d.present, 1)); {
	case d.present == 0:
		return "none"
	case share >= 0.99:
		return "sound"
	case share >= 0.9:
		return "fair"
	}
	return "poor"
}

// yearPage shows a year of days, and which calibration held when.
func (c *Console) yearPage(w http.ResponseWriter, r *http.Request) error {
	st, err := c.station(r)
	if err != nil {
		return err
	}
	year, err := strconv.Atoi(r.PathValue("year"))
	if err != nil || len(r.PathValue("year")) != 4 {
		return badInput(fmt.Sprintf("%q is not a year", r.PathValue("year")), "Write it as 2026.")
	}
	if year < firstDay.Year() || year >= lastDay.Year() {
		return notFound(fmt.Sprintf("no station has measured in %d", year), "Give a year between 1900 and 2099.")
	}
	from := time.Date(year, 1, 1, 0, 0, 0, 0, time.UTC).Unix() / 86400
	to := time.Date(year+1, 1, 1, 0, 0, 0, 0, time.UTC).Unix() / 86400
	days, quantities, err := c.countDays(st.ID, from, to)
	if err != nil {
		return err
	}
	total := dayCount{}
	for _, d := range days {
		total.present += d.present
		total.accepted += d.accepted
	}
	if total.present == 0 {
		return notFound(fmt.Sprintf("%s has no minutes in %d", st.ID, year), "Its newest day is behind its name on the network page.")
	}
	full := (to - from) * minute.PerDay * int64(len(quantities))
	base := "/station/" + url.PathEscape(st.ID) + "/year/"
	return c.render(w, "year.html", struct {
		frame
		Station       *rules.Station
		Year          int
		Before, After string
		Days          template.HTML
		Calibrations  template.HTML
		Words         string
		Expiring      []string
		Reports       []link
	}{c.frame(r, fmt.Sprintf("%s %d", st.Name, year), stationLink(st.ID), link{Text: strconv.Itoa(year), Here: true}), st, year, base + strconv.Itoa(year-1), base + strconv.Itoa(year+1),
		calendar(st.ID, from, days), calibrations(st, from, to),
		fmt.Sprintf("%.1f %% of the year's radiation minutes are there; %.1f %% of those are accepted.", 100*float64(total.present)/float64(full), 100*float64(total.accepted)/float64(total.present)),
		expiring(st, c.now()), reportLinks(st.ID, year, from, days)})
}

func reportLinks(station string, year int, from int64, days []dayCount) []link {
	var list []link
	last := 0
	for i, d := range days {
		if m := int(time.Unix((from+int64(i))*86400, 0).UTC().Month()); d.present > 0 && m != last {
			last = m
			list = append(list, link{Text: time.Month(m).String(), To: fmt.Sprintf("/station/%s/report/%04d-%02d", url.PathEscape(station), year, m)})
		}
	}
	return list
}

// calendar draws a day as a box that fills with what is there; its pattern says how much of that is accepted.
func calendar(station string, from int64, days []dayCount) template.HTML {
	const wide, high, left, top = 29.0, 22.0, 46.0, 18.0
	var b strings.Builder
	fmt.Fprintf(&b, `<svg viewBox="0 0 %s %s" class="calendar" role="group" aria-label="days of the year">`, short(left+31*wide+4), short(top+12*high+2))
	for d := 1; d <= 31; d++ {
		fmt.Fprintf(&b, `<text class="tx" x="%s" y="12">%d</text>`, short(left+(float64(d)-0.5)*wide), d)
	}
	for m := 1; m <= 12; m++ {
		fmt.Fprintf(&b, `<text class="ty" x="%s" y="%s">%s</text>`, short(left-6), short(top+(float64(m)-0.35)*high), time.Month(m).String()[:3])
	}
	for i, d := range days {
		at := time.Unix((from+int64(i))*86400, 0).UTC()
		x, y := left+float64(at.Day()-1)*wide+1, top+float64(at.Month()-1)*high+1
		share := float64(d.present) / float64(max(d.expected, 1))
		full := (high - 2) * share
		words := at.Format("2 January") + ": nothing"
		if d.present > 0 {
			words = fmt.Sprintf("%s: %.0f %% there, %.1f %% of that accepted", at.Format("2 January"), 100*share, 100*float64(d.accepted)/float64(d.present))
			fmt.Fprintf(&b, `<a href="%s">`, template.HTMLEscapeString(dayLink(station, from+int64(i))))
		}
		fmt.Fprintf(&b, `<rect class="box" x="%s" y="%s" width="%s" height="%s"><title>%s</title></rect>`, short(x), short(y), short(wide-2), short(high-2), words)
		if d.present > 0 {
			fmt.Fprintf(&b, `<rect class="d-%s" x="%s" y="%s" width="%s" height="%s"><title>%s</title></rect></a>`, d.class(), short(x), short(y+high-2-full), short(wide-2), short(full), words)
		}
	}
	b.WriteString("</svg>")
	return template.HTML(b.String())
}

// calibrations draws which calibration held when, a bar an instrument.
func calibrations(st *rules.Station, from, to int64) template.HTML {
	var with []*rules.Instrument
	for i := range st.Instruments {
		if len(st.Instruments[i].Calibrations) > 0 {
			with = append(with, &st.Instruments[i])
		}
	}
	if len(with) == 0 {
		return ""
	}
	f := newFigure("calibrations", "", 10, float64(from), float64(to), 0, 1)
	var b strings.Builder
	height := float64(len(with)*16 + 20)
	fmt.Fprintf(&b, `<svg viewBox="0 0 1000 %s" role="img" aria-label="calibration periods">`, short(height))
	for i, x := range with {
		y := float64(i*16 + 2)
		fmt.Fprintf(&b, `<text class="ty" x="%s" y="%s">%s</text>`, short(f.left-5), short(y+10), template.HTMLEscapeString(x.ID))
		for k := range x.Calibrations {
			cal := &x.Calibrations[k]
			begin, end := float64(cal.From.Unix())/86400, float64(to)
			if !cal.To.IsZero() {
				end = float64(cal.To.Unix()) / 86400
			}
			if end <= f.x0 || begin >= f.x1 {
				continue
			}
			a, z := f.x(max(begin, f.x0)), f.x(min(end, f.x1))
			words := calibrationWords(cal)
			fmt.Fprintf(&b, `<rect class="cal c%d" x="%s" y="%s" width="%s" height="12"><title>%s</title></rect>`, k%2, short(a), short(y), short(max(z-a-1, 1)), template.HTMLEscapeString(words))
			if z-a > 150 {
				fmt.Fprintf(&b, `<text class="in" x="%s" y="%s">%s</text>`, short(a+4), short(y+9.5), template.HTMLEscapeString(words))
			}
		}
	}
	for m := range 12 {
		at := time.Date(time.Unix(from*86400, 0).UTC().Year(), time.Month(m+1), 1, 0, 0, 0, 0, time.UTC)
		fmt.Fprintf(&b, `<text class="tx" x="%s" y="%s">%s</text>`, short(f.x(float64(at.Unix())/86400)), short(height-4), at.Format("Jan"))
	}
	b.WriteString("</svg>")
	return template.HTML(b.String())
}

func calibrationWords(cal *rules.Calibration) string {
	s := "from " + cal.From.Format(time.DateOnly)
	if cal.Serial != "" {
		s = cal.Serial + " " + s
	}
	if cal.SensitivityUVPerW > 0 {
		s += fmt.Sprintf(", %.4g µV/(W/m²)", cal.SensitivityUVPerW)
	}
	if cal.UncertaintyPercent > 0 {
		s += fmt.Sprintf(" ± %.2g %%", cal.UncertaintyPercent)
	}
	return s
}

// expiring says which calibrations end or have ended without another.
func expiring(st *rules.Station, now time.Time) []string {
	var list []string
	for i := range st.Instruments {
		x := &st.Instruments[i]
		if len(x.Calibrations) == 0 {
			continue
		}
		last := &x.Calibrations[len(x.Calibrations)-1]
		switch {
		case last.To.IsZero():
		case last.To.Before(now):
			list = append(list, fmt.Sprintf("%s: the last calibration ended on %s", x.ID, last.To.Format(time.DateOnly)))
		case last.To.Sub(now) < 60*24*time.Hour:
			list = append(list, fmt.Sprintf("%s: the calibration ends on %s", x.ID, last.To.Format(time.DateOnly)))
		}
	}
	return list
}
