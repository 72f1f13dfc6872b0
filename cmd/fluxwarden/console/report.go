package console

import (
	"bytes"
	"fmt"
	"html/template"
	"io"
	"math"
	"net/http"
	"net/url"
	"slices"
	"time"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// A reportView is one station's month on paper.
type reportView struct {
	Style                template.CSS
	Patterns             template.HTML
	Network              rules.Network
	Station              *rules.Station
	Month, Made, Program string
	Back                 string
	Quantities           []monthLine
	Days                 []dayLineOfReport
	DayHeads             []string
	Figures              []panel
	Calendar             template.HTML
	Faults               []reportFault
	Calibrations         []string
	Revised              []string
	Minutes, Expected    int
}

// A monthLine is what a month's accepted minutes of a quantity say.
type monthLine struct {
	Name, Unit                            string
	There, Accepted, Questioned, Rejected string
	Low, Mean, High, U95                  string
}

type dayLineOfReport struct {
	Day   string
	Cells []string
}

type reportFault struct{ Words, Severity, Lasted, Advice string }

// coverage is the share of a day's minutes below which no daily value is given: common practice, and the archive's products state their own rule.
const coverage = 0.95

// Report writes a station's month as one self-contained page that prints.
func (c *Console) Report(w io.Writer, station, month string) error {
	st := c.config.Site().Station(station)
	if st == nil {
		if !c.archive.has(station) {
			return notFound(fmt.Sprintf("there is no station %q", station), "The archive's stations are listed by fluxwarden history.")
		}
		st = &rules.Station{ID: station}
	}
	st = named(st)
	first, err := time.Parse("2006-01", month)
	if err != nil {
		return badInput(fmt.Sprintf("%q is not a month", month), "Write it as 2026-06.")
	}
	view, err := c.month(st, first)
	if err != nil {
		return err
	}
	style, err := files.ReadFile("look/style.css")
	if err != nil {
		return err
	}
	view.Style = template.CSS(style)
	var page bytes.Buffer
	if err := c.pages.ExecuteTemplate(&page, "report.html", view); err != nil {
		return fmt.Errorf("report: %w", err)
	}
	_, err = w.Write(page.Bytes())
	return err
}

func (c *Console) reportPage(w http.ResponseWriter, r *http.Request) error {
	st, err := c.station(r)
	if err != nil {
		return err
	}
	// The page carries its style in itself, so that it can be saved and sent; nothing else may be in it.
	w.Header().Set("Content-Security-Policy", "default-src 'none'; style-src 'unsafe-inline'; base-uri 'none'; frame-ancestors 'none'")
	return c.Report(w, st.ID, r.PathValue("month"))
}

func (c *Console) month(st *rules.Station, first time.Time) (*reportView, error) {
	from, to := first.Unix()/86400, first.AddDate(0, 1, 0).Unix()/86400
	s, err := readSpan(c.archive, st.ID, from*minute.PerDay, to*minute.PerDay, dayColumns())
	if err != nil {
		return nil, err
	}
	if s.rows == 0 {
		return nil, notFound(fmt.Sprintf("%s has no minutes in %s", st.ID, first.Format("January 2006")), "The calendar shows the months that have.")
	}
	v := &reportView{Patterns: patterns, Network: c.config.Site().Network, Station: st, Month: first.Format("January 2006"), Made: c.now().Format("2006-01-02 15:04Z"), Program: c.config.Program,
		Minutes: s.rows, Expected: len(s.have), Back: "/station/" + url.PathEscape(st.ID)}
	quantities := s.quantities(append(radiation(), weather()...))
	v.DayHeads = []string{"day"}
	sums := map[rules.Quantity][]dayMean{}
	for _, q := range quantities {
		v.Quantities = append(v.Quantities, monthOf(s, q))
		sums[q] = dailyMeans(s, q)
		v.DayHeads = append(v.DayHeads, fmt.Sprintf("%s, %s", inWords(q), prettyUnit(q.Unit())))
	}
	for d := from; d < to; d++ {
		line := dayLineOfReport{Day: dayName(d)}
		for _, q := range quantities {
			line.Cells = append(line.Cells, sums[q][d-from].words())
		}
		v.Days = append(v.Days, line)
	}
	v.Figures = monthFigures(s, quantities, sums, from, to)
	episodes, err := c.episodesOf(st.ID, from*minute.PerDay, to*minute.PerDay)
	if err != nil {
		return nil, err
	}
	for i := range episodes {
		v.Faults = append(v.Faults, reportFaultOf(&episodes[i]))
	}
	for i := range st.Instruments {
		x := &st.Instruments[i]
		for k := range x.Calibrations {
			if cal := &x.Calibrations[k]; cal.From.Unix() < to*86400 && (cal.To.IsZero() || cal.To.Unix() > from*86400) {
				v.Calibrations = append(v.Calibrations, x.ID+": "+calibrationWords(cal)+certificate(cal))
			}
		}
	}
	for d := from; d < to; d++ {
		if list := c.revisions(st.ID, d); len(list) > 1 {
			v.Revised = append(v.Revised, fmt.Sprintf("%s: %s", dayName(d), list[len(list)-1]))
		}
	}
	return v, nil
}

func certificate(cal *rules.Calibration) string {
	s := ""
	if cal.Scale != "" {
		s += ", scale " + cal.Scale
	}
	if cal.Certificate != "" {
		s += ", " + cal.Certificate
	}
	return s
}

func monthOf(s *span, q rules.Quantity) monthLine {
	values, u95 := s.number(q.String()), s.number(q.String()+"_u95")
	var n [rules.VerdictCount]int
	low, high, sum := math.Inf(1), math.Inf(-1), 0.0
	var spread []float64
	for i, v := range s.verdicts(q) {
		n[v]++
		if v == rules.Accepted && values[i] == values[i] {
			low, high, sum = min(low, values[i]), max(high, values[i]), sum+values[i]
			if u95[i] == u95[i] {
				spread = append(spread, u95[i])
			}
		}
	}
	there := len(s.have) - n[rules.Absent]
	share := func(k int) string { return fmt.Sprintf("%.1f %%", 100*float64(k)/float64(max(there, 1))) }
	l := monthLine{Name: inWords(q), Unit: prettyUnit(q.Unit()), There: fmt.Sprintf("%.1f %%", 100*float64(there)/float64(len(s.have))),
		Accepted: share(n[rules.Accepted]), Questioned: share(n[rules.Questioned]), Rejected: share(n[rules.Rejected]), Low: "–", Mean: "–", High: "–", U95: "–"}
	if n[rules.Accepted] > 0 {
		l.Low, l.High = fmt.Sprintf("%.1f", low), fmt.Sprintf("%.1f", high)
		if float64(n[rules.Accepted]) >= coverage*float64(len(s.have)) {
			l.Mean = fmt.Sprintf("%.1f", sum/float64(n[rules.Accepted]))
		}
	}
	if len(spread) > 0 {
		slices.Sort(spread)
		l.U95 = fmt.Sprintf("%.1f", spread[len(spread)/2])
	}
	return l
}

// A dayMean is the mean of a day's accepted minutes and how many there are.
type dayMean struct {
	mean float64
	n    int
}

func (d dayMean) stands() bool { return float64(d.n) >= coverage*minute.PerDay }

func (d dayMean) words() string {
	if !d.stands() {
		return fmt.Sprintf("– (%.0f %%)", 100*float64(d.n)/minute.PerDay)
	}
	return fmt.Sprintf("%.1f", d.mean)
}

func dailyMeans(s *span, q rules.Quantity) []dayMean {
	out := make([]dayMean, len(s.have)/minute.PerDay)
	values := s.number(q.String())
	for i, v := range s.verdicts(q) {
		if v == rules.Accepted && values[i] == values[i] {
			d := &out[i/minute.PerDay]
			d.n++
			d.mean += values[i]
		}
	}
	for i := range out {
		if out[i].n > 0 {
			out[i].mean /= float64(out[i].n)
		}
	}
	return out
}

// monthFigures draws daily means, and the verdicts of the month.
func monthFigures(s *span, quantities []rules.Quantity, means map[rules.Quantity][]dayMean, from, to int64) []panel {
	var list []panel
	days := int(to - from)
	ticksOfDays := make([]tick, 0, days)
	for d := range days {
		ticksOfDays = append(ticksOfDays, tick{float64(d) + 0.5, fmt.Sprint(d + 1)})
	}
	for _, group := range []struct {
		title string
		of    []rules.Quantity
	}{{"Daily means, shortwave", []rules.Quantity{rules.Global, rules.Direct, rules.Diffuse, rules.Reflected}}, {"Daily means, longwave", []rules.Quantity{rules.LWDown, rules.LWUp}}} {
		p := panel{Title: group.title}
		low, high := 0.0, 1.0
		xs := make([]float64, days)
		lines := map[rules.Quantity][]float64{}
		for _, q := range group.of {
			if !slices.Contains(quantities, q) {
				continue
			}
			ys := blank(days)
			for d, m := range means[q] {
				xs[d] = float64(d) + 0.5
				if m.stands() {
					ys[d] = m.mean
				}
			}
			low, high = spread(low, high, ys)
			lines[q] = ys
		}
		if len(lines) == 0 || !slices.ContainsFunc(group.of, func(q rules.Quantity) bool {
			return slices.ContainsFunc(lines[q], func(v float64) bool { return v == v })
		}) {
			continue
		}
		f := newFigure(group.title, "W/m²", 200, 0, float64(days), low, high*1.05)
		for _, q := range group.of {
			if ys := lines[q]; ys != nil {
				f.line("q "+q.String(), xs, ys)
				p.Key = append(p.Key, keyEntry{"q " + q.String(), inWords(q)})
			}
		}
		p.Figure = f.svg(ticksOfDays, nil, "day", "")
		list = append(list, p)
	}
	return append(list, panel{Title: "Verdicts", Figure: halfHourRibbons(s, quantities)})
}

func halfHourRibbons(s *span, quantities []rules.Quantity) template.HTML {
	var b bytes.Buffer
	fmt.Fprintf(&b, `<svg viewBox="0 0 1000 %d" role="img" aria-label="verdicts of the month">`, 12*len(quantities)+4)
	for i, q := range quantities {
		verdicts := s.verdicts(q)
		worst := make([]rules.Verdict, 0, len(verdicts)/30)
		for k := 0; k+30 <= len(verdicts); k += 30 {
			var n cell
			for _, v := range verdicts[k : k+30] {
				n[v]++
			}
			worst = append(worst, n.worst())
		}
		b.WriteString(ribbon(inWords(q), worst, 110, 880, float64(12*i+2), 9))
	}
	b.WriteString("</svg>")
	return template.HTML(b.String())
}

func reportFaultOf(e *fault.Episode) reportFault {
	l := lineOf(e)
	f := reportFault{Words: l.Words, Severity: l.Severity, Lasted: "still open", Advice: e.Advice}
	if !openEnded(e) {
		f.Lasted = duration(e.To - e.From)
	}
	return f
}

// duration says minutes as people do.
func duration(minutes int64) string {
	switch {
	case minutes < 120:
		return fmt.Sprintf("%d minutes", minutes)
	case minutes < 3*minute.PerDay:
		return fmt.Sprintf("%.1f hours", float64(minutes)/60)
	}
	return fmt.Sprintf("%.1f days", float64(minutes)/minute.PerDay)
}
