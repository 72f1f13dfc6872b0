package console

import (
	"cmp"
	"fmt"
	"html/template"
	"net/http"
	"net/url"
	"slices"
	"strings"
	"time"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
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
	Notes                              []noteLine
	NoteTo, Kept                       string // where the form goes; the note just kept
	NoteFrom, NoteUntil                string
}

type episodeLine struct{ Words, To, Severity, Also string }

// A shareLine says how much of a quantity's minutes have which verdict.
type shareLine struct {
	Quantity string
	Shares   [rules.VerdictCount]string
	N        int
}

func (c *Console) dayPage(w http.ResponseWriter, r *http.Request) error {
	st, day, err := c.stationDay(r)
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
	view := dayView{frame: c.frame(r, st.Name+" "+dayName(day), stationLink(st.ID), link{Text: dayName(day), Here: true}), Station: st, Day: dayName(day), Minutes: s.rows,
		Before: dayLink(st.ID, day-1), After: dayLink(st.ID, day+1), Whole: dayLink(st.ID, day), Export: dayLink(st.ID, day) + "/minutes",
		Year: fmt.Sprintf("/station/%s/year/%s", url.PathEscape(st.ID), dayName(day)[:4]), API: "/api/v1" + dayLink(st.ID, day)}
	sky := solarDayOf(st, day)
	view.Sun = sky.words
	view.Panels = panels(st, s, episodes, sky)
	view.Ribbons = ribbons(s, episodes)
	view.Shares = shares(s)
	for i := range episodes {
		view.Episodes = append(view.Episodes, lineOf(&episodes[i]))
	}
	if view.Notes, err = c.notesOf(st.ID, win.from, win.to); err != nil {
		return err
	}
	if c.config.Note != nil {
		view.NoteTo, view.Kept = noteLink(st.ID), r.URL.Query().Get("kept")
		view.NoteFrom, view.NoteUntil = dayName(day)+"T09:00", dayName(day)+"T09:10"
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
