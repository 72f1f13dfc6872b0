package console

import (
	"cmp"
	"encoding/json"
	"fmt"
	"html/template"
	"math"
	"net/http"
	"net/url"
	"slices"
	"strings"
	"time"

	"fluxwarden/qc/exact"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/limit"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store/export"
)

// A window is what a day page shows: a day, or a part of it.
type window struct {
	day, from, to int64 // minutes since 1970
}

func (w window) whole() bool { return w.from == w.day*minute.PerDay && w.to == w.from+minute.PerDay }

// windowOf reads ?from=HH:MM&to=HH:MM.
func windowOf(r *http.Request, day int64) (window, error) {
	w := window{day, day * minute.PerDay, (day + 1) * minute.PerDay}
	for _, x := range []struct {
		key string
		at  *int64
	}{{"from", &w.from}, {"to", &w.to}} {
		text := r.URL.Query().Get(x.key)
		if text == "" || text == "24:00" {
			continue
		}
		t, err := time.Parse("15:04", text)
		if err != nil {
			return w, badInput(fmt.Sprintf("%s=%s is not a time of day", x.key, text), "Write hours and minutes, such as 09:30.")
		}
		*x.at = day*minute.PerDay + int64(t.Hour()*60+t.Minute())
	}
	if w.to-w.from < 2 {
		return w, badInput("the end lies before the beginning", "Give a later one in to=.")
	}
	return w, nil
}

// dayColumns are what the day page reads of a minute.
func dayColumns() []string {
	list := []string{"time", "zenith_deg", "apparent_zenith_deg", "extraterrestrial", "clear_global", "clear_direct", "clear_diffuse", "clear_lw_down"}
	for _, q := range radiation() {
		list = append(list, q.String(), q.String()+"_verdict", q.String()+"_reasons", q.String()+"_u95")
	}
	for _, q := range weather() {
		list = append(list, q.String(), q.String()+"_verdict")
	}
	return list
}

// A panel is one figure of the day page.
type panel struct {
	Title  string
	Figure template.HTML
	Key    []keyEntry
	Slim   bool // shown folded away
}

// A keyEntry says in words what a line is.
type keyEntry struct{ Class, Text string }

type dayView struct {
	frame
	Station                            *rules.Station
	Day, Sun                           string
	Before, After, Year, Whole, Export string
	Panels                             []panel
	Ribbons                            template.HTML
	Episodes                           []episodeLine
	Shares                             []shareLine
	Revisions                          []string
	Minutes                            int
	Residuals                          []link
	Zoom                               []link
	API                                string
}

type episodeLine struct{ Words, To, Severity, Also string }

// A shareLine says how much of a quantity's minutes have which verdict.
type shareLine struct {
	Quantity string
	Shares   [rules.VerdictCount]string
	N        int
}

func (c *Console) dayPage(w http.ResponseWriter, r *http.Request) error {
	st, err := c.station(r)
	if err != nil {
		return err
	}
	day, err := parseDay(r.PathValue("day"))
	if err != nil {
		return err
	}
	win, err := windowOf(r, day)
	if err != nil {
		return err
	}
	s, err := readSpan(c.archive, st.ID, win.from, win.to, dayColumns())
	if err != nil {
		return err
	}
	if s.rows == 0 {
		return c.noSuchDay(st, day)
	}
	episodes, err := c.episodesOf(st.ID, win.from, win.to)
	if err != nil {
		return err
	}
	view := dayView{frame: c.frame(st.Name+" "+dayName(day), stationLink(st.ID), link{Text: dayName(day), Here: true}), Station: st, Day: dayName(day), Minutes: s.rows,
		Before: dayLink(st.ID, day-1), After: dayLink(st.ID, day+1), Whole: dayLink(st.ID, day), Export: dayLink(st.ID, day) + "/minutes.csv",
		Year: fmt.Sprintf("/station/%s/year/%s", url.PathEscape(st.ID), dayName(day)[:4]), API: "/api/v1" + dayLink(st.ID, day)}
	sky := solarDayOf(st, day)
	view.Sun = sky.words
	view.Panels = panels(st, s, episodes, sky)
	view.Ribbons = ribbons(s, episodes)
	view.Shares = shares(s)
	for i := range episodes {
		view.Episodes = append(view.Episodes, lineOf(&episodes[i]))
	}
	view.Revisions = c.revisions(st.ID, day)
	view.Zoom = zoomLinks(st.ID, win, sky)
	for _, x := range residuals {
		if x.possible(s) {
			view.Residuals = append(view.Residuals, link{Text: x.title, To: residualLink(st.ID, x.name, dayName(day), dayName(day+1), "time")})
		}
	}
	return c.render(w, "day.html", view)
}

// noSuchDay says what days there are instead.
func (c *Console) noSuchDay(st *rules.Station, day int64) error {
	what := fmt.Sprintf("%s has no minutes on %s in this stretch", st.ID, dayName(day))
	if !c.archive.has(st.ID) {
		return notFound(what, "The archive holds nothing of this station yet.")
	}
	days, err := c.archive.days(st.ID)
	if err != nil || len(days) == 0 {
		return notFound(what, "The archive holds nothing of this station yet.")
	}
	return notFound(what, fmt.Sprintf("Its days go from %s to %s; the calendar shows which of them have data.", dayName(days[0]), dayName(days[len(days)-1])))
}

// episodesOf gives the episodes that touch a stretch, the gravest first.
func (c *Console) episodesOf(station string, from, to int64) ([]fault.Episode, error) {
	all, err := c.archive.faults(station)
	if err != nil {
		return nil, err
	}
	var list []fault.Episode
	for _, e := range all {
		if e.From < to && (openEnded(&e) || e.To > from) {
			list = append(list, e)
		}
	}
	slices.SortStableFunc(list, func(x, y fault.Episode) int {
		return cmp.Or(-cmp.Compare(x.Severity, y.Severity), cmp.Compare(x.From, y.From))
	})
	return list, nil
}

func lineOf(e *fault.Episode) episodeLine {
	l := episodeLine{Words: e.Instrument + ": " + e.Kind.Entry().Title + " since " + minuteName(e.From), To: faultLink(e), Severity: e.Severity.String()}
	if !openEnded(e) {
		l.Words += " until " + minuteName(e.To)
	}
	for _, k := range e.Also {
		l.Also = k.Entry().Title
	}
	return l
}

func faultLink(e *fault.Episode) string {
	return "/station/" + url.PathEscape(e.Station) + "/fault/" + url.PathEscape(e.ID)
}

// clearColumn names the column of what a cloudless sky would have given.
func clearColumn(q rules.Quantity) string {
	switch q {
	case rules.Global, rules.Direct, rules.Diffuse, rules.LWDown:
		return "clear_" + q.String()
	}
	return ""
}

// panels draws the overview of the shortwave, then every quantity by itself against its limits, then the weather.
func panels(st *rules.Station, s *span, episodes []fault.Episode, sky solarDay) []panel {
	xs := make([]float64, len(s.have))
	for i := range xs {
		xs[i] = float64(s.from) + float64(i)
	}
	draw := func(title, unit string, height float64, lines []dayLine, envelope *[2][]float64) panel {
		low, high := 0.0, 1.0
		for _, l := range lines {
			low, high = spread(low, high, l.ys)
		}
		room := (high - low) * 0.04
		f := newFigure(title, unit, height, float64(s.from), float64(s.to), low-room, high+room)
		for i := range episodes {
			if e := &episodes[i]; slices.ContainsFunc(lines, func(l dayLine) bool { return concerns(st, e, l.quantity) }) {
				f.stretch("episode "+e.Severity.String(), e.Instrument+": "+e.Kind.Entry().Title, float64(e.From), float64(endOf(e, s.to)))
			}
		}
		if envelope != nil {
			f.band("envelope", xs, envelope[0], envelope[1])
		}
		if sky.risesAndSets {
			f.mark("sun", "rise", sky.rise)
			f.mark("sun", "set", sky.set)
		}
		f.mark("sun", "transit", sky.transit)
		p := panel{Title: title}
		for _, l := range lines {
			f.line(l.class, xs, l.ys)
			p.Key = append(p.Key, keyEntry{l.class, l.name})
		}
		if envelope != nil {
			p.Key = append(p.Key, keyEntry{"envelope", "physically possible"})
		}
		p.Figure = f.svg(utcTicks(f.x0, f.x1), solarTicks(sky.transit, f.x0, f.x1), "UTC", "solar")
		return p
	}
	var list []panel
	group := func(title string, of []rules.Quantity, height float64) {
		var lines []dayLine
		unit := ""
		for _, q := range s.quantities(of) {
			lines = append(lines, dayLine{q, inWords(q), "q " + q.String(), s.number(q.String())})
			unit = q.Unit()
			if name := clearColumn(q); name != "" && s.has(name) {
				lines = append(lines, dayLine{q, inWords(q) + ", clear sky", "clear " + q.String(), s.number(name)})
			}
		}
		if len(lines) > 0 {
			list = append(list, draw(title, prettyUnit(unit), height, lines, nil))
		}
	}
	group("Shortwave", []rules.Quantity{rules.Global, rules.Direct, rules.Diffuse, rules.Reflected}, 300)
	group("Longwave", []rules.Quantity{rules.LWDown, rules.LWUp}, 200)
	group("Ultraviolet", []rules.Quantity{rules.UV}, 150)
	group("Photosynthetically active", []rules.Quantity{rules.PAR}, 150)
	for _, q := range s.quantities(weather()) {
		p := draw(strings.ToUpper(inWords(q)[:1])+inWords(q)[1:], prettyUnit(q.Unit()), 110, []dayLine{{q, inWords(q), "q weather", s.number(q.String())}}, nil)
		p.Slim = true
		list = append(list, p)
	}
	for _, q := range s.quantities(radiation()) {
		lines := []dayLine{{q, inWords(q), "q " + q.String(), s.number(q.String())}}
		if name := clearColumn(q); name != "" && s.has(name) {
			lines = append(lines, dayLine{q, "clear sky", "clear " + q.String(), s.number(name)})
		}
		p := draw("Limits of "+inWords(q), prettyUnit(q.Unit()), 130, lines, envelopeOf(st, s, q))
		p.Slim = true
		list = append(list, p)
	}
	return list
}

type dayLine struct {
	quantity    rules.Quantity
	name, class string
	ys          []float64
}

// concerns says whether an episode is of what measures the quantity: its instrument, or the tracker that points and shades.
func concerns(st *rules.Station, e *fault.Episode, q rules.Quantity) bool {
	if e.Instrument == fault.Tracker {
		return q == rules.Direct || q == rules.Diffuse
	}
	x := instrument(st, e.Instrument)
	return x != nil && x.Measures == q
}

func endOf(e *fault.Episode, atMost int64) int64 {
	if openEnded(e) {
		return atMost
	}
	return e.To
}

func prettyUnit(u string) string {
	return strings.NewReplacer("W/m2", "W/m²", "umol/(m2 s)", "µmol/(m² s)", "degC", "°C").Replace(u)
}

// envelopeOf works out the physically possible limits along the span; nil for a quantity that has none of them.
func envelopeOf(st *rules.Station, s *span, q rules.Quantity) *[2][]float64 {
	low, high := blank(len(s.have)), blank(len(s.have))
	if q.Longwave() {
		b := st.Limits.PossibleLW[q-rules.LWDown]
		for i, ok := range s.have {
			if ok {
				low[i], high[i] = b.Low, b.High
			}
		}
		return &[2][]float64{low, high}
	}
	if int(q) >= len(st.Limits.Possible) {
		return nil
	}
	l := &st.Limits.Possible[q]
	zenith, apparent, beyond := s.number("zenith_deg"), s.number("apparent_zenith_deg"), s.number("extraterrestrial")
	for i, ok := range s.have {
		if ok && zenith[i] == zenith[i] {
			sun := limit.SunOf(zenith[i], cosDeg(zenith[i]), apparent[i], cosDeg(apparent[i]), beyond[i], false)
			low[i], high[i] = l.Low, limit.SunMax(l, &sun)
		}
	}
	return &[2][]float64{low, high}
}

func cosDeg(d float64) float64 { return exact.Cos(d * math.Pi / 180) }

// ribbons draws each quantity's verdicts under one time axis, and below them the episodes as spans with their names.
func ribbons(s *span, episodes []fault.Episode) template.HTML {
	list := s.quantities(append(radiation(), weather()...))
	f := newFigure("verdicts", "", 10, float64(s.from), float64(s.to), 0, 1)
	var b strings.Builder
	height := float64(len(list)*12 + len(episodes)*14 + 20)
	fmt.Fprintf(&b, `<svg viewBox="0 0 1000 %s" role="img" aria-label="verdicts of each quantity over the day">`, short(height))
	for i, q := range list {
		b.WriteString(ribbon(inWords(q), s.verdicts(q), f.left, f.width-f.left-f.right, float64(i*12+2), 9))
	}
	for i := range episodes {
		e, y := &episodes[i], float64(len(list)*12+i*14+4)
		from, to := f.x(max(float64(e.From), f.x0)), f.x(min(float64(endOf(e, s.to)), f.x1))
		at, anchor := to+4, "start"
		if to > 700 {
			at, anchor = max(from, f.left)+4, "start"
		}
		fmt.Fprintf(&b, `<a href="%s"><g class="lane %s"><rect x="%s" y="%s" width="%s" height="11"/><text class="in" x="%s" y="%s" text-anchor="%s">%s</text></g></a>`,
			template.HTMLEscapeString(faultLink(e)), e.Severity, short(from), short(y), short(max(to-from, 2)), short(at), short(y+9), anchor,
			template.HTMLEscapeString(e.Instrument+": "+e.Kind.Entry().Title))
	}
	for _, t := range utcTicks(f.x0, f.x1) {
		fmt.Fprintf(&b, `<text class="tx" x="%s" y="%s">%s</text>`, short(f.x(t.at)), short(height-4), t.label)
	}
	b.WriteString("</svg>")
	return template.HTML(b.String())
}

// verdictOrder is the order in which verdicts are listed.
var verdictOrder = [rules.VerdictCount]rules.Verdict{rules.Accepted, rules.Questioned, rules.Rejected, rules.Absent}

func shares(s *span) []shareLine {
	var list []shareLine
	for _, q := range s.quantities(append(radiation(), weather()...)) {
		var n [rules.VerdictCount]int
		for i, v := range s.verdicts(q) {
			if s.have[i] {
				n[v]++
			}
		}
		l := shareLine{Quantity: inWords(q), N: s.rows}
		for k, v := range verdictOrder {
			l.Shares[k] = fmt.Sprintf("%.1f %%", 100*float64(n[v])/float64(max(s.rows, 1)))
		}
		list = append(list, l)
	}
	return list
}

// revisions says by which commits the day's rows came about; what cannot be read is left out, the page is not about it.
func (c *Console) revisions(station string, day int64) []string {
	list, err := c.archive.revisions(station, day)
	if err != nil {
		return nil
	}
	var out []string
	for i, r := range list {
		s := fmt.Sprintf("revision %d, judge version %d", i+1, r.JudgeVersion)
		if r.Written != "" {
			s += ", written " + r.Written
		}
		if r.Reason != "" {
			s += ": " + r.Reason
		}
		if r.Superseded {
			s += " (replaced)"
		}
		out = append(out, s)
	}
	return out
}

// zoomLinks lead to parts of the day, so that zoom works without script too.
func zoomLinks(station string, w window, sky solarDay) []link {
	at := func(from, to float64, text string) link {
		begin := float64(w.day * minute.PerDay)
		from, to = max(from, begin), min(to, begin+minute.PerDay-1)
		clock := func(m float64) string { return strings.TrimSuffix(minuteName(int64(m))[11:], "Z") }
		return link{Text: text, To: dayLink(station, w.day) + "?from=" + clock(from) + "&to=" + clock(to)}
	}
	var list []link
	if !w.whole() {
		list = append(list, link{Text: "whole day", To: dayLink(station, w.day)})
		length := float64(w.to - w.from)
		list = append(list, at(float64(w.from)-length/2, float64(w.to)-length/2, "earlier"), at(float64(w.from)+length/2, float64(w.to)+length/2, "later"))
	}
	if sky.risesAndSets {
		list = append(list, at(sky.rise-60, sky.rise+120, "around sunrise"), at(sky.transit-90, sky.transit+90, "around transit"), at(sky.set-120, sky.set+60, "around sunset"))
	}
	return list
}

// dayJSON gives the day's minutes in columns: what the read-out under the pointer shows.
func (c *Console) dayJSON(w http.ResponseWriter, r *http.Request) error {
	st, err := c.station(r)
	if err != nil {
		return err
	}
	day, err := parseDay(r.PathValue("day"))
	if err != nil {
		return err
	}
	s, err := readSpan(c.archive, st.ID, day*minute.PerDay, (day+1)*minute.PerDay, dayColumns())
	if err != nil {
		return err
	}
	if s.rows == 0 {
		return c.noSuchDay(st, day)
	}
	type column struct {
		Name     string     `json:"name"`
		Unit     string     `json:"unit"`
		Values   []*float64 `json:"values"`
		Verdicts []string   `json:"verdicts"`
		Reasons  []string   `json:"reasons,omitempty"`
	}
	out := struct {
		Station string   `json:"station"`
		Day     string   `json:"day"`
		From    int64    `json:"from"` // minutes since 1970
		Columns []column `json:"columns"`
	}{Station: st.ID, Day: dayName(day), From: s.from}
	for _, q := range s.quantities(append(radiation(), weather()...)) {
		out.Columns = append(out.Columns, column{q.String(), q.Unit(), nullable(s.number(q.String())), s.words[q.String()+"_verdict"], s.words[q.String()+"_reasons"]})
	}
	for _, q := range []rules.Quantity{rules.Global, rules.Direct, rules.Diffuse, rules.LWDown} {
		if name := clearColumn(q); s.has(name) {
			out.Columns = append(out.Columns, column{Name: name, Unit: q.Unit(), Values: nullable(s.number(name))})
		}
	}
	writeJSON(w, out)
	return nil
}

// nullable makes null of what is not there; two decimals are more than any instrument resolves.
func nullable(x []float64) []*float64 {
	out := make([]*float64, len(x))
	for i, v := range x {
		if v == v {
			v = math.Round(v*100) / 100
			out[i] = &v
		}
	}
	return out
}

func writeJSON(w http.ResponseWriter, v any) {
	w.Header().Set("Content-Type", "application/json; charset=utf-8")
	w.Header().Set("Cache-Control", "no-cache")
	_ = json.NewEncoder(w).Encode(v) // into memory: it cannot fail for what we give it
}

// dayCSV gives the day's minutes as `export` does.
func (c *Console) dayCSV(w http.ResponseWriter, r *http.Request) error {
	st, err := c.station(r)
	if err != nil {
		return err
	}
	day, err := parseDay(r.PathValue("day"))
	if err != nil {
		return err
	}
	if !c.archive.has(st.ID) {
		return c.noSuchDay(st, day)
	}
	w.Header().Set("Content-Type", "text/csv; charset=utf-8")
	w.Header().Set("Content-Disposition", fmt.Sprintf("attachment; filename=\"%s_%s.csv\"", st.ID, dayName(day)))
	n, err := c.archive.csv(w, export.Request{Station: st.ID, From: day * minute.PerDay, To: (day + 1) * minute.PerDay})
	if err == nil && n == 0 {
		w.Header().Del("Content-Type")
		w.Header().Del("Content-Disposition")
		return c.noSuchDay(st, day)
	}
	return err
}
