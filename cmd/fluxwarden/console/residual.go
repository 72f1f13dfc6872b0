package console

import (
	"fmt"
	"html/template"
	"math"
	"net/http"
	"net/url"
	"slices"
	"time"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// A residual is what is left of a minute when one instrument is held against what its partners or the sky say of it.
type residual struct {
	name, title, unit, about string
	columns                  []string
	low, high                float64 // of the axis, unless the values stay within less
	value                    func(s *residualRow) float64
}

// A residualRow is what a residual may use of a minute; NaN for what is not there.
type residualRow struct{ global, direct, diffuse, reflected, lwDown, clearGlobal, clearDirect, clearLW, apparentZenithDeg, zenithDeg float64 }

// The bounds here are the console's own choice of where a residual can be read by eye; none of them judges anything.
var residuals = []residual{
	{"closure", "Closure", "%", "global over direct on the horizontal plus diffuse, less one", []string{"global", "direct", "diffuse"}, -25, 25,
		func(r *residualRow) float64 {
			sum := r.direct*cosDeg(r.apparentZenithDeg) + r.diffuse
			return percentOver(r.global, sum, r.apparentZenithDeg < 85 && sum > 50)
		}},
	{"overcast_gain", "Gain under overcast", "%", "global over diffuse while the beam is nothing, less one: the ratio of the two gains", []string{"global", "direct", "diffuse"}, -15, 15,
		func(r *residualRow) float64 { return percentOver(r.global, r.diffuse, r.direct < 2 && r.diffuse > 80) }},
	{"beam", "Beam against the clear sky", "%", "direct over the clear sky's, less one: clouds take, dirt takes, haze takes", []string{"direct", "clear_direct"}, -60, 20,
		func(r *residualRow) float64 { return percentOver(r.direct, r.clearDirect, r.clearDirect > 150) }},
	{"global_clear", "Global against the clear sky", "%", "global over the clear sky's, less one", []string{"global", "clear_global"}, -60, 40,
		func(r *residualRow) float64 { return percentOver(r.global, r.clearGlobal, r.clearGlobal > 50) }},
	{"night_zero", "Night zero of global", "W/m2", "what the global sensor says while the sun is more than six degrees down", []string{"global"}, -15, 15,
		func(r *residualRow) float64 {
			if r.zenithDeg < 96 {
				return math.NaN()
			}
			return r.global
		}},
	{"longwave", "Longwave against the clear sky", "W/m2", "downwelling longwave less the clear sky's: clouds add", []string{"lw_down", "clear_lw_down"}, -60, 120,
		func(r *residualRow) float64 { return r.lwDown - r.clearLW }},
	{"albedo", "Albedo", "%", "reflected over global", []string{"reflected", "global"}, 0, 110,
		func(r *residualRow) float64 {
			return percentOver(r.reflected, r.global, r.apparentZenithDeg < 80 && r.global > 50) + 100
		}},
}

func percentOver(a, b float64, applies bool) float64 {
	if !applies {
		return math.NaN()
	}
	return 100 * (a/b - 1)
}

// possible says whether the span has what the residual needs.
func (x *residual) possible(s *span) bool {
	for _, name := range x.columns {
		if !s.has(name) {
			return false
		}
	}
	return true
}

// concerned says whether an episode is of an instrument that the residual is made of.
func (x *residual) concerned(st *rules.Station, e *fault.Episode) bool {
	return slices.ContainsFunc(x.columns, func(name string) bool {
		q, ok := rules.ParseQuantity(name)
		return ok && concerns(st, e, q)
	})
}

func findResidual(name string) *residual {
	for i := range residuals {
		if residuals[i].name == name {
			return &residuals[i]
		}
	}
	return nil
}

// residualOf names the residual that tells a kind of fault best.
func residualOf(k rules.FaultKind, instrument *rules.Instrument) string {
	switch k {
	case rules.ZeroOffset:
		return "night_zero"
	case rules.PointingLost, rules.DomeSoiled:
		return "beam"
	case rules.SensitivityWrong, rules.ChannelsSwapped:
		return "overcast_gain"
	case rules.ThermistorBad:
		return "longwave"
	}
	if instrument != nil {
		switch instrument.Measures {
		case rules.LWDown, rules.LWUp:
			return "longwave"
		case rules.Reflected:
			return "albedo"
		}
	}
	return "closure"
}

func residualLink(station, name, from, to, against string) string {
	q := url.Values{"show": {name}, "from": {from}, "to": {to}, "against": {against}}
	return "/station/" + url.PathEscape(station) + "/residual?" + q.Encode()
}

const (
	residualDaysMax = 400
	eachMinuteDays  = 8 // up to so many days each minute is drawn; beyond, what the middle of a stretch is
)

// A series is a residual over a stretch, with what it can be drawn against.
type series struct {
	residual               *residual
	from, to               int64
	minutes, bearing, high []float64 // time in minutes since 1970, azimuth and apparent zenith in degrees
	values                 []float64
	spoilt                 []bool // a parent was rejected
	middle                 []point
}

// A point is the middle of a stretch and the range that holds eight tenths of it.
type point struct{ at, low, median, high float64 }

func (c *Console) residualSeries(station string, x *residual, from, to int64) (*series, error) {
	columns := append([]string{"time", "zenith_deg", "apparent_zenith_deg", "azimuth_deg"}, x.columns...)
	single := to-from <= eachMinuteDays*minute.PerDay
	for _, name := range x.columns {
		if _, ok := rules.ParseQuantity(name); ok && single {
			columns = append(columns, name+"_verdict")
		}
	}
	out := &series{residual: x, from: from, to: to}
	for begin := from; begin < to; begin += 31 * minute.PerDay {
		s, err := readSpan(c.archive, station, begin, min(begin+31*minute.PerDay, to), columns)
		if err != nil {
			return nil, err
		}
		out.add(s)
	}
	if !single {
		out.summarise()
	}
	return out, nil
}

func (o *series) add(s *span) {
	zenith, apparent, azimuth := s.number("zenith_deg"), s.number("apparent_zenith_deg"), s.number("azimuth_deg")
	g, b, d, r, l := s.number("global"), s.number("direct"), s.number("diffuse"), s.number("reflected"), s.number("lw_down")
	cg, cb, cl := s.number("clear_global"), s.number("clear_direct"), s.number("clear_lw_down")
	for i, ok := range s.have {
		if !ok {
			continue
		}
		v := o.residual.value(&residualRow{g[i], b[i], d[i], r[i], l[i], cg[i], cb[i], cl[i], apparent[i], zenith[i]})
		if v != v || math.IsInf(v, 0) {
			continue
		}
		o.minutes = append(o.minutes, float64(s.from)+float64(i))
		o.bearing, o.high = append(o.bearing, azimuth[i]), append(o.high, apparent[i])
		o.values = append(o.values, v)
		spoilt := false
		for _, name := range o.residual.columns {
			if w := s.words[name+"_verdict"]; w != nil && w[i] == rules.Rejected.String() {
				spoilt = true
			}
		}
		o.spoilt = append(o.spoilt, spoilt)
	}
}

// summarise gives the middle of each hour, or of each day of a longer stretch.
func (o *series) summarise() {
	step := 60.0
	if o.to-o.from > 62*minute.PerDay {
		step = minute.PerDay
	}
	for i := 0; i < len(o.values); {
		begin := math.Floor(o.minutes[i]/step) * step
		n := i
		for n < len(o.values) && o.minutes[n] < begin+step {
			n++
		}
		if n-i >= 5 {
			v := slices.Sorted(slices.Values(o.values[i:n]))
			o.middle = append(o.middle, point{begin + step/2, v[len(v)/10], v[len(v)/2], v[len(v)-1-len(v)/10]})
		}
		i = n
	}
}

// against are the ways to draw a residual.
var against = []struct{ name, title string }{{"time", "time"}, {"bearing", "bearing of the sun"}, {"zenith", "zenith angle"}}

// axis gives the ends of the axis: what holds nearly all values, with nothing in it, a fifth of the residual's range at least and all of it at most.
func (o *series) axis() (low, high float64) {
	x := o.residual
	low, high = 0, 0
	if n := len(o.values); n > 0 {
		v := slices.Sorted(slices.Values(o.values))
		low, high = min(0, v[n/100]), max(0, v[n-1-n/100])
	}
	room := (x.high - x.low) / 10
	low, high = min(low, -room)-room/2, max(high, room)+room/2
	return max(low, min(x.low, 0)), min(high, x.high)
}

// figure draws the series. Episodes are shaded where the axis is time.
func (o *series) figure(by string, episodes []fault.Episode) template.HTML {
	x := o.residual
	low, high := o.axis()
	f := newFigure(x.title, prettyUnit(x.unit), 320, float64(o.from), float64(o.to), low, high)
	switch by {
	case "bearing":
		f.x0, f.x1 = 0, 360
	case "zenith":
		f.x0, f.x1 = 0, 100
		if x.name == "night_zero" {
			f.x0, f.x1 = 90, 180
		}
	}
	f.line("zero", []float64{f.x0, f.x1}, []float64{0, 0})
	if by == "time" {
		for i := range episodes {
			e := &episodes[i]
			f.stretch("episode "+e.Severity.String(), e.Instrument+": "+e.Kind.Entry().Title, float64(e.From), float64(endOf(e, o.to)))
		}
		if o.middle != nil {
			xs, lo, mid, hi := make([]float64, len(o.middle)), make([]float64, len(o.middle)), make([]float64, len(o.middle)), make([]float64, len(o.middle))
			for i, p := range o.middle {
				xs[i], lo[i], mid[i], hi[i] = p.at, p.low, p.median, p.high
			}
			f.strokes("reach", xs, lo, hi)
			f.points("dot", xs, mid)
			return f.svg(o.timeTicks(), nil, "UTC", "")
		}
	}
	xs := map[string][]float64{"time": o.minutes, "bearing": o.bearing, "zenith": o.high}[by]
	sound, bad := make([]float64, len(o.values)), make([]float64, len(o.values))
	for i, v := range o.values {
		sound[i], bad[i] = v, math.NaN()
		if o.spoilt[i] {
			sound[i], bad[i] = math.NaN(), v
		}
	}
	f.points("dot", xs, sound)
	f.points("dot spoilt", xs, bad)
	if by == "time" {
		return f.svg(o.timeTicks(), nil, "UTC", "")
	}
	return f.svg(ticks(f.x0, f.x1, 12), nil, "degrees", "")
}

func (o *series) timeTicks() []tick {
	days := (o.to - o.from) / minute.PerDay
	if days <= 1 {
		return utcTicks(float64(o.from), float64(o.to))
	}
	var list []tick
	step := max(1, (days+11)/12)
	for d := o.from / minute.PerDay; d*minute.PerDay < o.to; d += step {
		list = append(list, tick{float64(d * minute.PerDay), time.Unix(d*86400, 0).UTC().Format("2 Jan")})
	}
	return list
}

// askedResidual reads a request for a residual.
func (c *Console) askedResidual(r *http.Request) (st *rules.Station, x *residual, from, to int64, by string, err error) {
	if st, err = c.station(r); err != nil {
		return st, x, 0, 0, "", err
	}
	q := r.URL.Query()
	name := q.Get("show")
	if name == "" {
		name = "closure"
	}
	if x = findResidual(name); x == nil {
		return st, x, 0, 0, "", badInput(fmt.Sprintf("there is no residual %q", name), "The page's list has those that there are.")
	}
	toDay := c.today() + 1
	if q.Get("to") != "" {
		if toDay, err = parseDay(q.Get("to")); err != nil {
			return st, x, 0, 0, "", err
		}
	}
	fromDay := toDay - 1
	if q.Get("from") != "" {
		if fromDay, err = parseDay(q.Get("from")); err != nil {
			return st, x, 0, 0, "", err
		}
	}
	switch {
	case toDay <= fromDay:
		return st, x, 0, 0, "", badInput("the end lies before the beginning", "Give a later day in to=; it is not included.")
	case toDay-fromDay > residualDaysMax:
		return st, x, 0, 0, "", badInput(fmt.Sprintf("%d days are more than one page shows", toDay-fromDay), fmt.Sprintf("Ask for %d at most; export has the rest.", residualDaysMax))
	}
	by = q.Get("against")
	if by == "" {
		by = "time"
	}
	if by != "time" && by != "bearing" && by != "zenith" {
		return st, x, 0, 0, "", badInput(fmt.Sprintf("a residual cannot be drawn against %q", by), "Give time, bearing or zenith.")
	}
	return st, x, fromDay * minute.PerDay, toDay * minute.PerDay, by, nil
}

func (c *Console) residualPage(w http.ResponseWriter, r *http.Request) error {
	st, x, from, to, by, err := c.askedResidual(r)
	if err != nil {
		return err
	}
	s, err := c.residualSeries(st.ID, x, from, to)
	if err != nil {
		return err
	}
	episodes, err := c.episodesOf(st.ID, from, to)
	if err != nil {
		return err
	}
	episodes = slices.DeleteFunc(episodes, func(e fault.Episode) bool { return !x.concerned(st, &e) })
	a, b := dayName(from/minute.PerDay), dayName(to/minute.PerDay)
	view := struct {
		frame
		Station        *rules.Station
		About, Stretch string
		N              int
		Figure         template.HTML
		Which, By, Far []link
		From, To       string
		Show, Against  string
	}{frame: c.frame(r, x.title, stationLink(st.ID), link{Text: x.title, Here: true}), Station: st, About: x.about, N: len(s.values), Figure: s.figure(by, episodes),
		Stretch: a + " to " + dayName(to/minute.PerDay-1), From: a, To: b, Show: x.name, Against: by}
	for i := range residuals {
		view.Which = append(view.Which, link{residuals[i].title, residualLink(st.ID, residuals[i].name, a, b, by), residuals[i].name == x.name})
	}
	for _, k := range against {
		view.By = append(view.By, link{k.title, residualLink(st.ID, x.name, a, b, k.name), k.name == by})
	}
	for _, k := range []struct {
		title string
		days  int64
	}{{"a day", 1}, {"a week", 7}, {"a month", 31}, {"a year", 366}} {
		view.Far = append(view.Far, link{k.title, residualLink(st.ID, x.name, dayName(to/minute.PerDay-k.days), b, by), (to-from)/minute.PerDay == k.days})
	}
	return c.render(w, "residual.html", view)
}

func (c *Console) residualJSON(w http.ResponseWriter, r *http.Request) error {
	st, x, from, to, _, err := c.askedResidual(r)
	if err != nil {
		return err
	}
	s, err := c.residualSeries(st.ID, x, from, to)
	if err != nil {
		return err
	}
	times := make([]int64, len(s.minutes))
	for i, m := range s.minutes {
		times[i] = int64(m)
	}
	writeJSON(w, map[string]any{"station": st.ID, "residual": x.name, "unit": x.unit, "about": x.about, "minutes": times, "values": nullable(s.values)})
	return nil
}
