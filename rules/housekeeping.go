package rules

import (
	"math"
	"strings"
)

// A HouseKind is what a housekeeping channel tells of. The list is closed and only grows at its end.
type HouseKind uint8

const (
	OtherHouse     HouseKind = iota // anything else: it is tested only against a range of its own
	FanHouse                        // speed of a dome's fan, turns a minute
	TrackerHouse                    // the tracker's mode, a number
	SupplyHouse                     // supply voltage, V
	PrecipHouse                     // precipitation within the minute, mm; more than nothing wets domes
	HouseKindCount = iota
)

var houseNames = [HouseKindCount]string{"other", "fan", "tracker", "supply", "precipitation"}

// String is the word by which a site file names the kind.
func (k HouseKind) String() string { return houseNames[k] }

// houseKindOf is the kind that an entry's name tells: the word itself, or the word and an underscore before anything.
func houseKindOf(name string) HouseKind {
	for k := FanHouse; k < HouseKindCount; k++ {
		if rest, ok := strings.CutPrefix(name, houseNames[k]); ok && (rest == "" || rest[0] == '_') {
			return k
		}
	}
	return OtherHouse
}

// Band is the sound range of the channel: its own bounds, else the station's for its kind; NaN is unbounded.
func (h *HousekeepingInput) Band(l *Limits) Band {
	nan := math.NaN()
	usual := [HouseKindCount]Band{{nan, nan}, {l.FanLowRPM, l.FanHighRPM}, {l.TrackerLow, nan}, {l.SupplyLowV, l.SupplyHighV}, {0, l.PrecipitationHighMM}}
	b := usual[h.Kind]
	if h.Low == h.Low {
		b.Low = h.Low
	}
	if h.High == h.High {
		b.High = h.High
	}
	return b
}

// Concerns says whether a value out of the range is held against an instrument: one that the site file names, else, for a fan, all that have a
// dome; for a tracker, what it points or shades; for a supply, all. Rain by itself is nobody's fault and concerns none.
func (h *HousekeepingInput) Concerns(in *Instrument) bool {
	if h.OfGiven {
		for _, id := range h.Of {
			if id == in.ID {
				return true
			}
		}
		return false
	}
	switch h.Kind {
	case FanHouse:
		return in.Measures != Direct
	case TrackerHouse:
		return in.Measures == Direct || in.Measures == Diffuse || in.Shaded
	case PrecipHouse:
		return false
	}
	return true
}

// A StatusBit maps one bit of an instrument's own status word to the test that misses while it says so.
type StatusBit struct {
	Bit   int  // 0 is the lowest, up to 31
	Test  Test // Signal, Sampling, Clock or Housekeeping
	Clear bool // the bit says so when it is not set
}

var statusTests = []string{Housekeeping.String(), Signal.String(), Sampling.String(), Clock.String()}
