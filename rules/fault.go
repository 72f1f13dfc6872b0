package rules

import "strings"

// A FaultKind is a kind of the catalogue. The list is closed and only grows at its end: the numbers stand in archives.
type FaultKind uint8

const (
	SignalLost FaultKind = iota
	SignalFrozen
	DataGap
	Noise
	RangeClipped
	PolarityReversed
	UnitSlip
	ChannelsSwapped
	ClockShift
	PointingLost
	ShadeOff
	DomeWet
	DomeSnow
	DomeSoiled
	DomeFouled
	SensorTilted
	SensitivityWrong
	SensitivityDrift
	ZeroOffset
	VentilationLost
	ThermistorBad
	Shadow
	InstrumentTouched
	FaultKindCount = iota
)

var faultKindNames = [FaultKindCount]string{"signal_lost", "signal_frozen", "data_gap", "noise", "range_clipped", "polarity_reversed", "unit_slip",
	"channels_swapped", "clock_shift", "pointing_lost", "shade_off", "dome_wet", "dome_snow", "dome_soiled", "dome_fouled", "sensor_tilted",
	"sensitivity_wrong", "sensitivity_drift", "zero_offset", "ventilation_lost", "thermistor_bad", "shadow", "instrument_touched"}

func (k FaultKind) String() string { return faultKindNames[k] }

// ParseFaultKind gives the kind of a name.
func ParseFaultKind(name string) (FaultKind, bool) {
	for i, n := range faultKindNames {
		if n == name {
			return FaultKind(i), true
		}
	}
	return 0, false
}

// A FaultSet is a set of fault kinds, one bit a kind.
type FaultSet uint32

// Of is the set with just this kind.
func (k FaultKind) Of() FaultSet { return 1 << k }

// Has says whether the set holds the kind.
func (s FaultSet) Has(k FaultKind) bool { return s>>k&1 == 1 }

// Join writes the names in the list's order with sep between.
func (s FaultSet) Join(sep string) string {
	var b strings.Builder
	for k := FaultKind(0); k < FaultKindCount; k++ {
		if s.Has(k) {
			if b.Len() > 0 {
				b.WriteString(sep)
			}
			b.WriteString(faultKindNames[k])
		}
	}
	return b.String()
}

// A Severity says whether somebody should act on an episode now, or it is only suspected.
type Severity uint8

const (
	Watch Severity = iota // suspected; looked at when there is time
	Act                   // somebody should act on it now
)

func (s Severity) String() string {
	if s == Act {
		return "act"
	}
	return "watch"
}
