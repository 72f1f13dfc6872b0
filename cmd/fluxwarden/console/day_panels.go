package console

import (
	"math"
	"slices"
	"strings"

	"fluxwarden/qc/exact"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/limit"
	"fluxwarden/rules"
)

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
