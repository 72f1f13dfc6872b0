package fault

import (
	"fmt"
	"math"
	"strings"
	"time"

	"fluxwarden/rules"
)

// Size is how much an episode's fault is, in words that a technician can check; empty where there is no number.
func (e *Episode) Size() string {
	n := func(name string) float64 { v, _ := e.number(name); return v }
	has := func(name string) bool { _, ok := e.number(name); return ok }
	switch {
	case e.Kind == rules.SensorTilted && has("tilt"):
		return fmt.Sprintf("%.1f degrees towards %.0f", n("tilt"), n("towards"))
	case e.Kind == rules.ZeroOffset && has("offset"):
		return fmt.Sprintf("%+.1f W/m2 at night", n("offset"))
	case e.Kind == rules.VentilationLost && has("night_zero_clear"):
		return fmt.Sprintf("clear-night zero %.1f instead of %.1f W/m2", n("night_zero_clear"), n("usual"))
	case e.Kind == rules.ClockShift && has("shift"):
		return clockWords(n("shift"))
	case e.Kind == rules.ThermistorBad && has("body_less_air"):
		return fmt.Sprintf("%+.1f K off the air", n("body_less_air"))
	case e.Kind == rules.Shadow && has("bearing_from"):
		return fmt.Sprintf("with the sun at %.0f to %.0f degrees", n("bearing_from"), n("bearing_to"))
	case e.Kind == rules.ShadeOff && has("share_of_beam_on_diffuse"):
		return fmt.Sprintf("%.0f %% of the beam on the diffuse instrument", 100*n("share_of_beam_on_diffuse"))
	case e.Kind == rules.UnitSlip && has("factor"):
		return fmt.Sprintf("a factor of %.4g", n("factor"))
	case e.Kind == rules.Noise && has("scatter"):
		return fmt.Sprintf("by %.0f W/m2 from minute to minute", n("scatter"))
	case e.Kind == rules.RangeClipped && has("rail"):
		return fmt.Sprintf("at %.0f W/m2", n("rail"))
	case e.Kind == rules.SignalFrozen && has("value"):
		return fmt.Sprintf("at %.1f W/m2", n("value"))
	case e.Kind == rules.SignalLost && n("seen_instead_of_expected") < -1:
		return fmt.Sprintf("%.0f W/m2 missing", -n("seen_instead_of_expected"))
	case e.Kind == rules.ChannelsSwapped && has("diffuse_above_global"):
		return fmt.Sprintf("diffuse %.0f W/m2 above global", n("diffuse_above_global"))
	case e.Kind == rules.DomeWet && has("net"):
		return fmt.Sprintf("net longwave %.0f W/m2 under an open sky", n("net"))
	case e.Kind == rules.PointingLost && has("beam_low"):
		return fmt.Sprintf("direct %.0f %% low", n("beam_low"))
	case e.Kind == rules.InstrumentTouched && has("minutes"):
		return fmt.Sprintf("%.0f minutes", n("minutes"))
	case e.Kind == rules.SensitivityDrift && has("drift"):
		return fmt.Sprintf("%+.1f %% in %.0f days", n("drift"), n("days"))
	case has("gain"):
		return gainWords(n("gain"))
	}
	return ""
}

func gainWords(gain float64) string {
	percent := 100 * (gain - 1)
	if percent < 0 {
		return fmt.Sprintf("%.1f %% too low", -percent)
	}
	return fmt.Sprintf("%.1f %% too high", percent)
}

func clockWords(minutes float64) string {
	if minutes < 0 {
		return fmt.Sprintf("%.0f minutes behind", -minutes)
	}
	return fmt.Sprintf("%.0f minutes ahead", minutes)
}

// What is the fault in words, its size with it: "out of level since 14 May 09:10, 2.8 degrees towards 240". Times are UTC; the year is said where
// it is not the one of the minute asked at.
func (e *Episode) What(atMinute int64) string {
	s := e.Kind.Entry().Title
	if e.Severity == rules.Watch {
		s = "suspected: " + s
	}
	s += " since " + instant(e.From, atMinute)
	if e.To != Open {
		s += " until " + instant(e.To, atMinute)
	}
	if size := e.Size(); size != "" {
		s += ", " + size
	}
	for _, k := range e.Also {
		s += " (or " + k.Entry().Title + ")"
	}
	return s
}

// Say is the whole sentence: the instrument, what it has, and what to do, with the caution that the work needs.
func (e *Episode) Say(atMinute int64) string {
	advice := e.Advice
	if advice == "" {
		advice = e.Kind.Entry().Advice
	}
	return e.Instrument + ": " + e.What(atMinute) + "; " + lowerFirst(advice)
}

func lowerFirst(s string) string {
	if s == "" {
		return s
	}
	return strings.ToLower(s[:1]) + s[1:]
}

func instant(minuteUTC, atMinute int64) string {
	t, now := time.Unix(60*minuteUTC, 0).UTC(), time.Unix(60*atMinute, 0).UTC()
	if t.Year() != now.Year() {
		return t.Format("2 Jan 2006 15:04")
	}
	return t.Format("2 Jan 15:04")
}

// Say is what became of a repair, in words: "worked: 4.1 % off before, 0.3 % after, over 30 minutes".
func (c *Check) Say() string {
	value := func(v float64) string {
		if c.Unit == "1" {
			return fmt.Sprintf("%.1f %%", 100*v)
		}
		return fmt.Sprintf("%.1f %s", v, c.Unit)
	}
	if c.Outcome == CheckNotSeen {
		return fmt.Sprintf("not seen yet: %d of %d minutes that can show it; it was off by %s", c.N, checkMinutes, value(c.Before.Float()))
	}
	if c.N == 0 {
		return c.Outcome.String() + ": the same fault has come again"
	}
	return fmt.Sprintf("%s: off by %s before, %s after, over %d minutes", c.Outcome, value(c.Before.Float()), value(c.After.Float()), c.N)
}

// Badness puts episodes in the order of the morning sheet, the worst first: what somebody should act on, what spoils more, what came first.
func Badness(e *Episode) float64 {
	b := float64(10 * int(rules.FaultEffect(e.Kind, e.Severity)))
	if e.Severity == rules.Act {
		b += 100
	}
	switch e.Instrument {
	case Logger:
		b += 5 // it concerns them all
	case Tracker:
		b += 3
	}
	if gain, ok := e.number("gain"); ok {
		b += math.Min(2, 4*math.Abs(gain-1))
	}
	return b + e.Confidence
}
