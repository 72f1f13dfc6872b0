package fault

import (
	"math"
	"strconv"

	"fluxwarden/rules"
)

// A Setup is what the diagnosis needs to know of a station.
type Setup struct {
	Station     string
	LatitudeDeg float64
	PressureHPa float64 // of the standard atmosphere at the station
	Sky         SkySetup
	GapMinutes  int64 // no record for so long is a gap
	Instruments [rules.RadiationCount]Instrument

	HasTrackerMode, HasSupply, HasPrecipitation bool // the station sends them

	Notes *rules.NoteBook // of the station, in force; nil is none
}

// A House is what a housekeeping channel says: whether it is in its sound range.
type House uint8

const (
	HouseUnknown House = iota // there is no such channel, or it said nothing this minute
	HouseSound
	HouseOut
)

// An Instrument is the primary one of a quantity.
type Instrument struct {
	ID                string
	Class             string
	Present           bool
	Volts             bool    // it sends a voltage; SensitivityUVPerW turns it into irradiance
	SensitivityUVPerW float64 // 1 where the logger converts
	HasBody           bool    // its body temperature is sent
	HasFan            bool    // the speed of its fan is sent
}

// A Minute is what the diagnosis is told of one minute. Values are as measured, before any correction, NaN where absent.
type Minute struct {
	Minute      int64   // since 1970
	ZenithDeg   float64 // apparent
	AzimuthDeg  float64
	Mu          float64 // cosine of the apparent zenith, nothing below the horizon
	SaWm2       float64
	Hidden      bool // the sun is behind the horizon mask
	Records     int  // stamps that fell into the minute
	AnyConflict bool
	Value       [rules.QuantityCount]float64
	Marked      [rules.QuantityCount]bool // the logger sent a mark
	Run         [rules.QuantityCount]int  // minutes on end with the very same value
	BodyC       float64                   // of the primary lw_down
	NetWm2      float64                   // its thermopile signal over its sensitivity
	Sky         SkyInputs                 // of the channels that the site file names, NaN where absent

	Fan             [rules.RadiationCount]House // of the primary instruments' fans; HouseOut where one of several is
	Tracker, Supply House
	PrecipitationMM float64 // in the minute; NaN where not sent

	Clear [rules.RadiationCount]float64 // set by Watcher.Minute: what a cloudless sky would give, NaN where not known
}

// A Number is a float64 that JSON writes as null where it is not a number.
type Number float64

// Float is the number, NaN for null.
func (n Number) Float() float64 { return float64(n) }

// MarshalJSON writes the shortest text that reads back as the same number.
func (n Number) MarshalJSON() ([]byte, error) {
	if v := float64(n); math.IsNaN(v) || math.IsInf(v, 0) {
		return []byte("null"), nil
	}
	return strconv.AppendFloat(nil, float64(n), 'g', -1, 64), nil
}

// UnmarshalJSON reads a number or null.
func (n *Number) UnmarshalJSON(b []byte) error {
	if string(b) == "null" {
		*n = Number(math.NaN())
		return nil
	}
	v, err := strconv.ParseFloat(string(b), 64)
	*n = Number(v)
	return err
}

// A RunState is how long a series has said the very same at the end of a day.
type RunState struct {
	Value Number `json:"v"`
	Count int    `json:"n"`
}
