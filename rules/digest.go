package rules

import (
	"crypto/sha256"
	"encoding/hex"
	"slices"
	"strconv"
	"strings"
	"time"
)

// digestVersion stands first in the canonical form; it is raised when the form changes.
const digestVersion = "fluxwarden site 1"

// digest fills in the digests of the stations and of the site. Names, contacts, certificates, lines and comments cannot
// change a row and are left out; so is the order of the stations.
func (s *Site) digest() {
	parts := make([]string, len(s.Stations))
	for i := range s.Stations {
		st := &s.Stations[i]
		st.Digest = hash(st.canonical())
		parts[i] = st.ID + " " + st.Digest
	}
	slices.Sort(parts)
	s.Digest = hash(digestVersion + "\n" + strings.Join(parts, "\n"))
}

func hash(text string) string {
	sum := sha256.Sum256([]byte(text))
	return hex.EncodeToString(sum[:])
}

// canon writes one line an entry: a word, then its values, texts quoted so that no two inputs write alike.
type canon struct{ strings.Builder }

func (c *canon) line(word string, values ...any) {
	c.WriteString(word)
	for _, v := range values {
		c.WriteByte(' ')
		switch v := v.(type) {
		case string:
			c.WriteString(strconv.Quote(v))
		case float64:
			if v == 0 {
				v = 0 // one zero, not two
			}
			c.WriteString(strconv.FormatFloat(v, 'g', -1, 64))
		case bool:
			c.WriteString(strconv.FormatBool(v))
		case time.Duration:
			c.WriteString(strconv.FormatInt(int64(v), 10))
		case time.Time:
			if v.IsZero() {
				c.WriteByte('-')
			} else {
				c.WriteString(v.UTC().Format(time.RFC3339Nano))
			}
		default:
			panic("rules: canonical form: a type without one")
		}
	}
	c.WriteByte('\n')
}

func (st *Station) canonical() string {
	var c canon
	c.line(digestVersion)
	c.line("station", st.ID, st.LatitudeDeg, st.LongitudeDeg, st.ElevationM)
	c.line("time", st.Time.LabelEnd, st.Time.Interval)
	for _, p := range st.Horizon {
		c.line("horizon", p.AzimuthDeg, p.ElevationDeg)
	}
	for i := range st.Instruments {
		in := &st.Instruments[i]
		c.line("instrument", in.ID, in.Measures.String(), in.Class, in.Primary, in.Shaded)
		p := &in.Input
		c.line("input", p.Signal, p.SignalUnit, p.Irradiance, p.Case, p.CaseUnit, p.Dome, p.DomeUnit, p.SignalMin, p.SignalMax)
		if p.Thermistor[0] != 0 {
			c.line("thermistor", p.Thermistor[0], p.Thermistor[1], p.Thermistor[2])
		}
		for _, f := range in.ShadeRing {
			c.line("shade_ring", f)
		}
		for _, d := range in.Directional {
			c.line("directional", d[0], d[1])
		}
		if in.FieldOfView != 0 || in.Window != "" {
			c.line("optics", in.FieldOfView, in.Window)
		}
		if in.Offset != ByDefault {
			c.line("thermal_offset", in.Offset == On)
		}
		for _, b := range in.StatusBits {
			c.line("status", in.Status, float64(b.Bit), b.Test.String(), b.Clear)
		}
		for k := range in.Calibrations {
			cal := &in.Calibrations[k]
			c.line("calibration", cal.From, cal.To, cal.Serial, cal.SensitivityUVPerW, cal.UncertaintyPercent, cal.Scale, cal.K1, cal.K2, cal.K3, cal.ZeroWm2)
			for _, t := range cal.TemperatureCoeff {
				c.line("temperature", t)
			}
		}
	}
	for _, w := range st.Weather {
		c.line("weather", w.Quantity.String(), w.Channel, w.Unit)
	}
	for _, h := range st.Housekeeping {
		c.line("housekeeping", h.Name, h.Channel, h.Low, h.High)
		if h.Kind != houseKindOf(h.Name) {
			c.line("house_kind", h.Kind.String())
		}
		for _, x := range h.Values {
			c.line("house_value", x)
		}
		if h.OfGiven {
			c.line("house_of", strings.Join(h.Of, " "))
		}
	}
	st.Sky.canonical(&c)
	for i := range st.Local {
		t := &st.Local[i]
		c.line("local", t.Name, t.Miss)
		for _, q := range t.Of {
			c.line("local_of", q.String())
		}
	}
	for i := range limitTable {
		c.line("limit", limitTable[i].Key, *limitTable[i].field(&st.Limits))
	}
	if st.Products.NightZero { // the default writes nothing: rule sets of before have the digest that they had
		c.line("products", "night_negatives", "zero")
	}
	return c.String()
}

// canonical writes the clear sky's lines; what the file does not say writes nothing.
func (s *Sky) canonical(c *canon) {
	c.line("sky", s.Model, s.OzoneCm, s.WaterCm, s.AOD, s.Albedo)
	for _, m := range [...]struct {
		key    string
		values []float64
	}{{"ozone_cm", s.Monthly.OzoneCm}, {"water_cm", s.Monthly.WaterCm}, {"aod", s.Monthly.AOD}, {"albedo", s.Monthly.Albedo}} {
		for i, x := range m.values {
			c.line("sky_month", m.key, float64(i+1), x)
		}
	}
	if s.Channels != (SkyChannels{}) {
		c.line("sky_channels", s.Channels.OzoneCm, s.Channels.WaterCm, s.Channels.AOD, s.Channels.Albedo)
	}
}
