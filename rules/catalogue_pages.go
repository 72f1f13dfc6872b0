package rules

import (
	"fmt"
	"strings"
)

// A FaultPage is what stands on a kind's page beside its catalogue entry.
type FaultPage struct {
	Told []string // how it is told from each of the entry's ConfusedWith, in their order
	Take string   // what to take along
}

// PageOf is the page of a kind.
func PageOf(k FaultKind) *FaultPage { return &pages[k] }

// Caution is the part of the advice that warns; empty where the work needs no more than care.
func (e *CatalogueEntry) Caution() string {
	var out []string
	for _, c := range [...]string{cautionHeight, cautionBeam, cautionMains} {
		if strings.Contains(e.Advice, c) {
			out = append(out, strings.TrimSpace(c))
		}
	}
	return strings.Join(out, " ")
}

// Work is the advice without its caution.
func (e *CatalogueEntry) Work() string {
	work := e.Advice
	for _, c := range [...]string{cautionHeight, cautionBeam, cautionMains} {
		work = strings.Replace(work, c, "", 1)
	}
	return work
}

// Explain writes the kind's page as plain text that is also Markdown.
func (k FaultKind) Explain() string {
	e, p := k.Entry(), PageOf(k)
	var b strings.Builder
	fmt.Fprintf(&b, "# %s: %s\n\n", k, e.Title)
	fmt.Fprintf(&b, "What it looks like: %s\nWhen it can be seen: %s\nWhat it spoils: %s\n", e.Looks, e.Seen, e.Reaches)
	fmt.Fprintf(&b, "How much it matters: %s\n\nHow it is told from its neighbours:\n", severityWords(k))
	for i, other := range e.ConfusedWith {
		fmt.Fprintf(&b, "- %s: %s\n", other, p.Told[i])
	}
	fmt.Fprintf(&b, "\nWhat to do: %s\nWhat to take along: %s\n", e.Work(), p.Take)
	if c := e.Caution(); c != "" {
		fmt.Fprintf(&b, "Caution: %s\n", c)
	}
	return b.String()
}

func severityWords(k FaultKind) string {
	if k.Entry().Severity == Watch {
		return "to watch; nobody need go for it."
	}
	out := "somebody should act on it once it is confirmed; its values are "
	switch {
	case k.Entry().Restorable:
		out += "restored where its size is known, else "
	}
	switch FaultEffect(k, Act) {
	case Reject:
		return out + "rejected."
	case Question:
		return out + "questioned."
	}
	return out + "left as they are."
}

var pages = [FaultKindCount]FaultPage{
	SignalLost: {Take: "a multimeter, spare cable and plug.", Told: []string{
		"a gap silences the whole station, this one channel while the others go on.",
		"a lost pointing sends the light to diffuse and comes back where the tracker stands; an open input floats about nothing in every sky.",
		"under snow some light still comes through and follows the sun; an open input follows nothing."}},
	SignalFrozen: {Take: "a laptop for the logger, a cloth to shade the dome.", Told: []string{
		"a lost signal is blank or floats about nothing; a frozen one stands at a value that was once right.",
		"a clipped one stands still only while its neighbours ask for more, and falls with them.",
		"in a gap no record comes at all; here the records come with the same value."}},
	DataGap: {Take: "a laptop for the logger, spare fuse and battery, the modem's papers.", Told: []string{
		"a lost signal is one instrument's; the records of the others go on.",
		"a clock set forward leaves a hole as long as the jump, and the sun is early or late after it."}},
	Noise: {Take: "a screwdriver for terminals, a multimeter, spare shielded cable.", Told: []string{
		"an open input floats about nothing; noise jumps about the right mean.",
		"something on the dome only takes light away; noise goes both ways, and by night as well."}},
	RangeClipped: {Take: "a laptop for the logger's program.", Told: []string{
		"a frozen value stays when its neighbours fall; a clipped one falls with them below its rail.",
		"a wrong sensitivity is off at every height; a clip only at the top."}},
	PolarityReversed: {Take: "a screwdriver for terminals, a marker for the wires.", Told: []string{
		"an offset is the same by night; a turned sign grows with the sun.",
		"a swapped pair gives the other's values, never negative ones."}},
	UnitSlip: {Take: "a laptop for the logger's program, the site file.", Told: []string{
		"a wrong coefficient is off by some percent, seldom by a factor of two; a unit by ten and its powers.",
		"a lost signal does not follow the sun; a thousandth of it does."}},
	ChannelsSwapped: {Take: "a laptop, the wiring plan, a cloth to shade one dome at a time.", Told: []string{
		"a lost pointing takes direct to nothing; a swap leaves both in the sun, each with the other's course.",
		"a wrong sensitivity keeps the instrument's own course; a swap gives it the other's, under cloud the two agree but for their ratio.",
		"a shade that is off lifts diffuse to global and leaves global right; in a swap global falls as diffuse rises."}},
	ClockShift: {Take: "a clock that is right, a laptop for the logger.", Told: []string{
		"a tilt leaves the beam's own rise and fall where they belong; a wrong clock moves them too.",
		"a lost pointing has no beam; a wrong clock has one, early or late."}},
	PointingLost: {Take: "tracker tools, a laptop, dark glasses, a clock that is right.", Told: []string{
		"with the shade off diffuse is too high while direct is right; off the sun direct is low as well, by as much.",
		"an open input floats about nothing in every sky and shades nothing; off the sun diffuse gains what direct loses.",
		"a wrong clock of the logger keeps the beam; a wrong clock of the tracker loses it every day."}},
	ShadeOff: {Take: "tools for the shading arm, dark glasses.", Told: []string{
		"off the sun direct is low too; with only the shade off it is right.",
		"in a swap global is low in sunshine; here it is right."}},
	DomeWet: {Take: "a soft dry cloth.", Told: []string{
		"snow keeps most light off for hours and goes in a step; dew scatters it and goes within hours of sunrise.",
		"without a fan the night zero is low under every clear sky; dew needs a damp one. Dew that comes back often points to the fan.",
		"dirt or droppings do not dry away."}},
	DomeSnow: {Take: "a soft brush, warm water, a ladder if the dome is high.", Told: []string{
		"dew and frost go within hours of sunrise and scatter rather than darken; snow darkens for as long as it lies.",
		"something else on the dome needs no frost and no snowfall.",
		"an open input gives nothing; under snow some light follows the sun."}},
	DomeSoiled: {Take: "water, a soft cloth, pure alcohol for the window.", Told: []string{
		"a drift does not come back with rain or cleaning.",
		"a wrong coefficient comes from one minute to the next and does not grow.",
		"droppings, a hand print or a web come at once and hold some bearings more than others."}},
	DomeFouled: {Take: "water, a soft cloth, bird spikes if it happens often.", Told: []string{
		"snow needs frost and covers all of the dome.",
		"dirt grows for days; this is there from one minute to the next and does not grow.",
		"a shadow is sharp, lasts minutes and takes the beam alone, always at one bearing; a spot on the dome reaches hours of the sun's way and takes a little of the sky too."}},
	SensorTilted: {Take: "a spirit level, the key for the feet, a camera.", Told: []string{
		"a wrong clock moves the beam's own rise and fall too; a tilt does not.",
		"a wrong coefficient shows under overcast as well; a tilt shows with the beam only.",
		"a shadow takes one bearing; a tilt changes with the sun all day."}},
	SensitivityWrong: {Take: "the certificate, the serial number as it stands on the instrument.", Told: []string{
		"a drift needs weeks; this came from one moment to the next.",
		"dirt grows for days and goes with rain or cleaning.",
		"a unit is off by ten or its powers; a coefficient by some percent."}},
	SensitivityDrift: {Take: "water and a soft cloth, fresh desiccant, a travelling standard if there is one.", Told: []string{
		"dirt goes with rain or cleaning; a drift stays. Clean first, then look again.",
		"a wrong coefficient is one step on one day; a drift is a line through many."}},
	ZeroOffset: {Take: "a multimeter, a shorting plug, fresh desiccant.", Told: []string{
		"without a fan the zero sinks with the clear sky and comes back under cloud; an offset of the electronics does neither.",
		"a wrong coefficient gives nothing at night.",
		"a turned sign is right at night but for its sign; an offset is not."}},
	VentilationLost: {Take: "a spare fan and filter, a multimeter.", Told: []string{
		"an offset of the electronics is the same under cloud; still air about the dome shows under the clear sky.",
		"a wet dome dries; without a fan the next damp night wets it again."}},
	ThermistorBad: {Take: "a multimeter, the thermistor's table, a thermometer.", Told: []string{
		"a wrong coefficient of the thermopile moves with the net signal; a wrong body temperature moves longwave even when the net signal is nothing.",
		"a wet dome takes the net signal to nothing; the body temperature stays right.",
		"an offset of the voltage leaves the body temperature right."}},
	Shadow: {Take: "a compass, a camera, the site's horizon drawing.", Told: []string{
		"something on the dome reaches hours of the sun's way; a shadow minutes, with sharp edges.",
		"a tilt changes with the sun all day; a shadow takes one bearing.",
		"a lost pointing goes on past the bearing; a shadow does not."}},
	InstrumentTouched: {Take: "nothing.", Told: []string{
		"something on the dome stays; hands are gone within a quarter of an hour.",
		"noise goes on, by night too.",
		"a lost signal floats about nothing; a hand leaves some of the light."}},
}
