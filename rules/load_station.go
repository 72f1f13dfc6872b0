package rules

import (
	"math"
	"slices"
	"time"

	"gopkg.in/yaml.v3"
)

// site builds the site from the values of the file and holds them against one another.
func (r *reader) site(v *value) *Site {
	site := &Site{}
	if n := v.at("network"); n != nil {
		site.Network = Network{ID: n.textAt("id", ""), Name: n.textAt("name", ""), Contact: n.textAt("contact", ""),
			Licence: n.textAt("licence", ""), Citation: n.textAt("citation", "")}
	}
	limits := DefaultLimits()
	r.limits(v.at("rules"), &limits, "rules")
	products := productsOf(v.at("rules"), Products{})
	stations := v.at("stations")
	if stations == nil {
		return site
	}
	seen := map[string]int{}
	for _, s := range stations.items {
		st := r.station(s, limits)
		r.localTests(&st, v.at("rules"), s.at("rules"))
		st.Products = productsOf(s.at("rules"), products)
		if first := seen[st.ID]; first > 0 && st.ID != "" {
			r.problem(s.at("id").node, "give each station its own id", "station id %s is there twice, first on line %d", short(st.ID), first)
		}
		seen[st.ID] = st.Line
		site.Stations = append(site.Stations, st)
	}
	return site
}

func (r *reader) station(v *value, limits Limits) Station {
	st := Station{ID: v.textAt("id", ""), Name: v.textAt("name", ""), LatitudeDeg: v.numberAt("latitude", 0),
		LongitudeDeg: v.numberAt("longitude", 0), ElevationM: v.numberAt("elevation", 0), Line: v.node.Line, Limits: limits}
	path := "station " + st.ID
	st.Time = r.timing(v.at("time"), path)
	st.Horizon = r.horizon(v.at("horizon"), path)
	if st.LatitudeDeg == 0 && st.LongitudeDeg == 0 && v.given("latitude") && v.given("longitude") {
		r.warn(v.at("latitude").node, "check the position", "%s lies at 0 north, 0 east, in the sea", path)
	}
	r.limits(v.at("rules"), &st.Limits, path+" rules")
	use := channelUse{}
	if list := v.at("instruments"); list != nil {
		seen := map[string]int{}
		for _, i := range list.items {
			in := r.instrument(i, path, use)
			if first := seen[in.ID]; first > 0 && in.ID != "" {
				r.problem(i.at("id").node, "give each instrument its own id", "%s has the instrument id %s twice, first on line %d", path, short(in.ID), first)
			}
			seen[in.ID] = in.Line
			st.Instruments = append(st.Instruments, in)
		}
		r.primaries(&st, list, path)
		for i := range st.Instruments {
			if in := &st.Instruments[i]; in.Offset == On && (in.Measures == Global || in.Measures == Diffuse) && !st.TakesOffset(in) {
				r.problem(list.items[i].at("thermal_offset").node, "leave it out, or add the case: channel of a pyrgeometer for lw_down",
					"%s instrument %s: its thermal offset needs a pyrgeometer for lw_down whose case temperature is sent", path, in.ID)
			}
		}
	}
	st.Weather = r.weather(v.at("weather"), path, use)
	st.Housekeeping = r.housekeeping(v.at("housekeeping"), path, &st)
	st.Sky = sky(v.at("sky"))
	st.Files = r.files(v.at("files"), path)
	st.Modbus = r.modbus(v.at("modbus"), path, channelUnits(&st))
	return st
}

func (r *reader) timing(v *value, path string) Timing {
	t := Timing{LabelEnd: v.textAt("label", "start") == "end", Interval: time.Minute}
	if v.given("interval") {
		t.Interval = v.at("interval").span
		if t.Interval%time.Second != 0 || time.Minute%t.Interval != 0 {
			r.problem(v.at("interval").node, "write 1s, 2s, 3s, 4s, 5s, 6s, 10s, 12s, 15s, 20s, 30s or 60s",
				"%s time interval %s does not divide a minute into whole seconds", path, t.Interval)
		}
	}
	return t
}

func (r *reader) horizon(v *value, path string) []HorizonPoint {
	if v == nil || !v.ok {
		return nil
	}
	var points []HorizonPoint
	for _, c := range v.items {
		if !c.ok {
			continue
		}
		p := HorizonPoint{c.numbers[0], c.numbers[1]}
		switch {
		case p.AzimuthDeg < 0 || p.AzimuthDeg >= 360:
			r.problem(c.node, "write 0 up to, not with, 360; the mask closes by itself", "%s horizon has the azimuth %g", path, p.AzimuthDeg)
		case p.ElevationDeg > 89:
			r.problem(c.node, "write an elevation of -10 to 89 degrees", "%s horizon has the elevation %g", path, p.ElevationDeg)
		case len(points) > 0 && p.AzimuthDeg == points[len(points)-1].AzimuthDeg:
			r.problem(c.node, "keep one of them", "%s horizon has the azimuth %g twice", path, p.AzimuthDeg)
		case len(points) > 0 && p.AzimuthDeg < points[len(points)-1].AzimuthDeg:
			r.problem(c.node, "sort the corners by rising azimuth", "%s horizon goes back from azimuth %g to %g", path, points[len(points)-1].AzimuthDeg, p.AzimuthDeg)
		}
		points = append(points, p)
	}
	return points
}

// primaries holds that of several instruments of one quantity exactly one is primary. A single one is.
func (r *reader) primaries(st *Station, list *value, path string) {
	var of [RadiationCount][]int
	for i, in := range st.Instruments {
		if list.items[i].given("measures") {
			of[in.Measures] = append(of[in.Measures], i)
		}
	}
	for q, at := range of {
		if len(at) == 1 {
			st.Instruments[at[0]].Primary = true
			continue
		}
		primary := -1
		for _, i := range at {
			switch {
			case !st.Instruments[i].Primary:
			case primary < 0:
				primary = i
			default:
				r.problem(list.items[i].at("primary").node, "keep primary: true on one of them", "%s has two primary instruments for %s, %s and %s", path, Quantity(q),
					st.Instruments[primary].ID, st.Instruments[i].ID)
			}
		}
		if len(at) > 2 {
			r.warn(list.items[at[2]].node, "leave it out, or give it a station of its own", "%s has %d instruments for %s: the minutes of the primary and of the first other are stored, the rest is judged and not stored", path, len(at), Quantity(q))
		}
		if len(at) > 1 && primary < 0 {
			r.problem(list.items[at[1]].node, "add primary: true to one of them", "%s has %d instruments for %s and none is primary", path, len(at), Quantity(q))
		}
	}
}

// A channelUse tells who reads each channel of a station.
type channelUse map[string]channelUser

type channelUser struct {
	who  string
	line int
}

// take notes a use and refuses a second one: two instruments on one channel are a slip of the pen whose numbers look sound.
func (r *reader) take(use channelUse, v *value, station, who string) {
	if v == nil || !v.ok {
		return
	}
	r.reserved(v.node, v.text, station)
	if other, taken := use[v.text]; taken {
		r.problem(v.node, "give each its own channel", "%s: channel %s of %s is already read by %s on line %d", station, v.text, who, other.who, other.line)
		return
	}
	use[v.text] = channelUser{who, v.node.Line}
}

func (r *reader) reserved(n *yaml.Node, channel, path string) {
	if channel == "time" {
		r.problem(n, "rename it in the logger or the feed", "%s: a channel cannot be named time, which is the column of the stamp", path)
	}
}

// long gives the channel of a short or long entry, and the entry again if it is the long form.
func long(v *value) (channel, more *value) {
	if v.objects != nil {
		return v.at("channel"), v
	}
	return v, nil
}

func (r *reader) weather(v *value, path string, use channelUse) []WeatherInput {
	if v == nil {
		return nil
	}
	var inputs []WeatherInput
	for q := AirTemperature; q < QuantityCount; q++ {
		entry := v.at(q.String())
		if entry == nil || !entry.ok {
			continue
		}
		channel, more := long(entry)
		if channel == nil || !channel.ok {
			continue
		}
		r.take(use, channel, path, "weather "+q.String())
		inputs = append(inputs, WeatherInput{Quantity: q, Channel: channel.text, Unit: more.textAt("unit", q.Unit())})
	}
	return inputs
}

func (r *reader) housekeeping(v *value, path string, st *Station) []HousekeepingInput {
	if v == nil {
		return nil
	}
	var inputs []HousekeepingInput
	for _, name := range v.keys {
		entry := v.at(name)
		if !entry.ok {
			continue
		}
		channel, more := long(entry)
		if channel == nil || !channel.ok {
			continue
		}
		r.reserved(channel.node, channel.text, path)
		in := HousekeepingInput{Name: name, Channel: channel.text, Low: more.numberAt("low", math.NaN()), High: more.numberAt("high", math.NaN()),
			Kind: houseKindOf(name)}
		r.houseMore(more, path+" housekeeping "+name, st, &in)
		if in.Low > in.High {
			r.problem(more.at("low").node, "write the smaller one as low", "%s housekeeping %s: low %g is above high %g", path, name, in.Low, in.High)
		}
		inputs = append(inputs, in)
	}
	slices.SortFunc(inputs, func(a, b HousekeepingInput) int {
		if a.Name < b.Name {
			return -1
		}
		return 1
	})
	return inputs
}

func sky(v *value) Sky {
	s := Sky{Model: v.textAt("model", "bird"), OzoneCm: v.numberAt("ozone_cm", math.NaN()), WaterCm: v.numberAt("water_cm", math.NaN()),
		AOD: v.numberAt("aod", math.NaN()), Albedo: v.numberAt("albedo", math.NaN())}
	months := v.at("monthly")
	s.Monthly = SkyMonths{OzoneCm: months.numbersAt("ozone_cm"), WaterCm: months.numbersAt("water_cm"), AOD: months.numbersAt("aod"),
		Albedo: months.numbersAt("albedo")}
	live := v.at("channels")
	s.Channels = SkyChannels{OzoneCm: live.textAt("ozone_cm", ""), WaterCm: live.textAt("water_cm", ""), AOD: live.textAt("aod", ""),
		Albedo: live.textAt("albedo", "")}
	return s
}

// productsOf applies what a rules section says of the clean products.
func productsOf(rules *value, p Products) Products {
	if v := rules.at("products"); v != nil && v.ok && v.given("night_negatives") {
		p.NightZero = v.at("night_negatives").text == "zero"
	}
	return p
}

// limits applies the overrides of a rules section.
func (r *reader) limits(rules *value, to *Limits, path string) {
	v := rules.at("limits")
	if v == nil || !v.ok {
		return
	}
	for _, key := range v.keys {
		if row, known := FindLimit(key); known && v.given(key) {
			*row.field(to) = v.at(key).number
		}
	}
	for _, pair := range [][2]string{{"possible.lw_down.low", "possible.lw_down.high"}, {"possible.lw_up.low", "possible.lw_up.high"},
		{"rare.lw_down.low", "rare.lw_down.high"}, {"rare.lw_up.low", "rare.lw_up.high"}, {"air_temperature.low", "air_temperature.high"}, {"body.low", "body.high"},
		{"fan.low", "fan.high"}, {"supply.low", "supply.high"}} {
		low, _ := FindLimit(pair[0])
		high, _ := FindLimit(pair[1])
		if a, b := *low.field(to), *high.field(to); (v.given(pair[0]) || v.given(pair[1])) && a >= b {
			at := v.at(pair[0])
			if !v.given(pair[0]) {
				at = v.at(pair[1])
			}
			r.problem(at.node, "write a band with the low end below the high one", "%s limits: %s %g is not below %s %g", path, pair[0], a, pair[1], b)
		}
	}
}
