package engine

import (
	"math"
	"slices"
	"strings"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/limit"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// A housePlan is the housekeeping channels of a station that are tested, and what the diagnosis is told of them.
type housePlan struct {
	channels []houseChannel
	fans     [rules.RadiationCount]uint32 // channels that are the fan of the quantity's primary instrument, a bit each
	tracker  uint32
	supply   uint32
	rain     int // channel of the precipitation, -1 if there is none
}

type houseChannel struct {
	name    string
	column  int
	band    rules.Band
	values  []float64
	against []int // series that a value out of the range is held against
}

// planHouse compiles the housekeeping and marks the series that it, or a status word, is held against.
func (p *Plan) planHouse() {
	h := &p.house
	h.rain = -1
	for i := range p.series {
		if s := &p.series[i]; s.instrument != nil && slices.ContainsFunc(s.instrument.StatusBits, func(b rules.StatusBit) bool { return b.Test == rules.Housekeeping }) {
			s.tests |= rules.Housekeeping.Of()
		}
	}
	for i := range p.Station.Housekeeping {
		in := &p.Station.Housekeeping[i]
		c := houseChannel{name: in.Name, column: p.column(in.Channel), band: in.Band(&p.Station.Limits), values: in.Values}
		if c.band.Low != c.band.Low && c.band.High != c.band.High && len(c.values) == 0 {
			continue // kept raw and nothing more
		}
		bit := uint32(1) << len(h.channels)
		for k := range p.series {
			s := &p.series[k]
			if s.instrument == nil || !in.Concerns(s.instrument) {
				continue
			}
			c.against = append(c.against, k)
			s.tests |= rules.Housekeeping.Of()
			if in.Kind == rules.FanHouse && s.primary {
				h.fans[s.quantity] |= bit
			}
		}
		switch in.Kind {
		case rules.TrackerHouse:
			h.tracker |= bit
		case rules.SupplyHouse:
			h.supply |= bit
		case rules.PrecipHouse:
			h.rain = c.column
		}
		h.channels = append(h.channels, c)
	}
}

// tell says to the diagnosis which channels there are.
func (h *housePlan) tell(p *Plan, u *fault.Setup) {
	u.HasTrackerMode, u.HasSupply, u.HasPrecipitation = h.tracker != 0, h.supply != 0, h.rain >= 0
	for q := range u.Instruments {
		u.Instruments[q].HasFan = h.fans[q] != 0
	}
}

func (h *housePlan) columns(j *Judged) {
	if len(h.channels) == 0 {
		return
	}
	for i := range h.channels {
		j.HouseNames = append(j.HouseNames, h.channels[i].name)
	}
	j.HouseOut, j.house = make([]uint32, minute.PerDay), make([]houseRow, minute.PerDay)
}

// HouseText writes the names of a row's channels that are out of their range, ';' between.
func (j *Judged) HouseText(out uint32) string { return namesOf(j.HouseNames, out) }

func namesOf(all []string, set uint32) string {
	var names []string
	for i, name := range all {
		if set>>i&1 == 1 {
			names = append(names, name)
		}
	}
	return strings.Join(names, ";")
}

// A houseRow is what the diagnosis is told of one minute's housekeeping.
type houseRow struct {
	fan             [rules.RadiationCount]fault.House
	tracker, supply fault.House
	rainMM          float64
}

func (h *houseRow) tell(m *fault.Minute) {
	m.Fan, m.Tracker, m.Supply, m.PrecipitationMM = h.fan, h.tracker, h.supply, h.rainMM
}

// houseTests holds the housekeeping channels against their sound ranges. A channel that said nothing speaks against nobody.
func (p *Plan) houseTests(j *Judged, block *minute.Block, from, to int) {
	h := &p.house
	if len(h.channels) == 0 {
		return
	}
	for i := range j.Series {
		if c := j.Series[i].Outcomes[rules.Housekeeping]; c != nil {
			for r := from; r < to; r++ {
				c[r] = rules.NoPartner
			}
		}
	}
	for r := from; r < to; r++ {
		known, out := uint32(0), uint32(0)
		for i := range h.channels {
			c := &h.channels[i]
			state := c.state(&block.Columns[c.column], r)
			if state == fault.HouseUnknown {
				continue
			}
			known |= 1 << i
			o := rules.Pass
			if state == fault.HouseOut {
				out |= 1 << i
				o = rules.Miss
			}
			for _, k := range c.against {
				if s := &j.Series[k]; !s.Missed[r].Has(rules.Housekeeping) {
					s.Passed[r] &^= rules.Housekeeping.Of()
					s.set(rules.Housekeeping, r, o)
				}
			}
		}
		j.HouseOut[r] = out
		row := &j.house[r]
		for q, mask := range h.fans {
			row.fan[q] = stateOf(mask, known, out)
		}
		row.tracker, row.supply, row.rainMM = stateOf(h.tracker, known, out), stateOf(h.supply, known, out), math.NaN()
		if h.rain >= 0 {
			row.rainMM = precipitationOf(&block.Columns[h.rain], r)
		}
	}
}

// stateOf is what several channels of one kind come to: out of range if one of them is.
func stateOf(mask, known, out uint32) fault.House {
	switch {
	case mask&out != 0:
		return fault.HouseOut
	case mask&known != 0:
		return fault.HouseSound
	}
	return fault.HouseUnknown
}

// precipitationOf is what fell in a minute, mm: the sum of its records.
func precipitationOf(col *minute.Column, r int) float64 {
	v := col.Mean[r]
	if col.N[r] == 0 || v != v || limit.IsMark(v) {
		return math.NaN()
	}
	return v * float64(col.N[r])
}

// state holds one minute of a channel against its range. A mode that changed within the minute has to be sound before and after.
func (c *houseChannel) state(col *minute.Column, r int) fault.House {
	v := col.Mean[r]
	if col.N[r] == 0 || v != v || limit.IsMark(v) {
		return fault.HouseUnknown
	}
	if len(c.values) > 0 {
		if lo, hi := extremes(col, r); slices.Contains(c.values, lo) && slices.Contains(c.values, hi) {
			return fault.HouseSound
		}
		return fault.HouseOut
	}
	if v < c.band.Low || v > c.band.High {
		return fault.HouseOut
	}
	return fault.HouseSound
}

// extremes are the least and the greatest sample of a minute; the mean where the logger sent that alone.
func extremes(col *minute.Column, r int) (lo, hi float64) {
	lo, hi = col.Min[r], col.Max[r]
	if lo != lo || hi != hi {
		return col.Mean[r], col.Mean[r]
	}
	return lo, hi
}

const statusWordMax = 1<<32 - 1

// statusTests lets the tests miss that an instrument's own status word names. A bit counts as set if it is in the least or the greatest word
// of the minute, as clear if it is not in one of them; what is no whole number from 0 to 2^32-1 is no word.
func (p *Plan) statusTests(j *Judged, block *minute.Block, from, to int) {
	for i := range p.series {
		s := &p.series[i]
		if s.statusCol < 0 {
			continue
		}
		out, col := &j.Series[i], &block.Columns[s.statusCol]
		for r := from; r < to; r++ {
			if c := out.Outcomes[rules.Housekeeping]; c != nil && len(p.house.channels) == 0 {
				c[r] = rules.NoPartner
			}
			lo, hi := extremes(col, r)
			if col.N[r] == 0 || !isWord(lo) || !isWord(hi) {
				continue
			}
			for _, b := range s.instrument.StatusBits {
				a, z := uint32(lo)>>b.Bit&1 == 1, uint32(hi)>>b.Bit&1 == 1
				says := a || z
				if b.Clear {
					says = !a || !z
				}
				switch {
				case says:
					out.Passed[r] &^= b.Test.Of()
					out.set(b.Test, r, rules.Miss)
				case b.Test == rules.Housekeeping && !out.Missed[r].Has(rules.Housekeeping):
					out.set(rules.Housekeeping, r, rules.Pass)
				}
			}
		}
	}
}

func isWord(v float64) bool { return v >= 0 && v <= statusWordMax && v == math.Trunc(v) }
