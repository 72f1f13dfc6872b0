package rules

import "time"

// A Site is one site file: a network, its stations and the rules that hold for them.
type Site struct {
	Network  Network
	Stations []Station // in the file's order; ids are unique
	Digest   string    // sha256, hex, of the canonical form of all that can change a row; the stations' order is not part of it
	Warnings []Problem // what is allowed but looks like a slip, in the order of lines
}

// Station gives the station of an id, nil if there is none.
func (s *Site) Station(id string) *Station {
	for i := range s.Stations {
		if s.Stations[i].ID == id {
			return &s.Stations[i]
		}
	}
	return nil
}

// A Network is the stations under one configuration.
type Network struct {
	ID, Name, Contact, Licence, Citation string
}

// A Station is a place with a position and instruments.
type Station struct {
	ID           string // [a-z0-9_-]{1,40}: it stands in broker subjects and folder names
	Name         string
	LatitudeDeg  float64 // north positive, -90..90
	LongitudeDeg float64 // east positive, -180..180
	ElevationM   float64 // above sea level, -430..9000
	Time         Timing
	Horizon      []HorizonPoint // sorted by azimuth; empty is a flat horizon
	Instruments  []Instrument   // in the file's order; ids are unique
	Weather      []WeatherInput
	Housekeeping []HousekeepingInput
	Sky          Sky
	Local        []LocalTest // the network's, then the station's own
	Limits       Limits      // the published ones with the network's and the station's overrides applied
	Products     Products
	Files        []FileLayout   // that are followed; no part of the digest
	Modbus       []ModbusDevice // that are asked; no part of the digest
	Digest       string         // sha256, hex, of the station's own part: a change elsewhere in the file leaves it alone
	Line         int            // of the site file
}

// Products says how the clean products are made of judged minutes.
type Products struct {
	// NightZero sets every shortwave value below zero to zero while the sun's zenith angle is above 93 degrees, as the monthly means of
	// Roesch et al. 2011 want it; otherwise all are kept. Some kept and some set to zero would leave a bias that nobody can undo.
	NightZero bool
}

// Sky is the clear-sky model of a station and what it assumes where nothing is learnt; NaN where the file says nothing.
type Sky struct {
	Model   string  // "bird", "ineichen" or "solis"
	OzoneCm float64 // total column, 0.05..0.7
	WaterCm float64 // precipitable water, 0.01..10
	AOD     float64 // broadband aerosol optical depth, 0..5
	Albedo  float64 // of the ground, 0..1

	Monthly  SkyMonths   // in place of those above
	Channels SkyChannels // before both, where they send
}

// SkyMonths are twelve values each, January first; empty where the file says nothing.
type SkyMonths struct{ OzoneCm, WaterCm, AOD, Albedo []float64 }

// SkyChannels name the channels that send what the clear sky depends on; empty where there is none.
type SkyChannels struct{ OzoneCm, WaterCm, AOD, Albedo string }

// Timing is how a station's logger stamps its records.
type Timing struct {
	LabelEnd bool          // the stamp is the end of the interval, not its start
	Interval time.Duration // 1 s to 60 s between records
}

// A HorizonPoint is a corner of the horizon mask, degrees; azimuth from north, clockwise.
type HorizonPoint struct{ AzimuthDeg, ElevationDeg float64 }

// An Instrument is one physical device, or the place of one: an exchange is a new serial in its calibrations.
type Instrument struct {
	ID           string // [A-Za-z0-9_-]{1,40}
	Serial       string // for calibrations that state none
	Measures     Quantity
	Class        string // ISO 9060:2018 "A", "B", "C" (a pyrheliometer also "AA"); empty if not classified
	Primary      bool   // of those that measure one quantity, the one whose value is used first; a single one is primary
	Input        Input
	Calibrations []Calibration // sorted by From; no overlap
	Shaded       bool          // a pyrgeometer kept out of the beam
	ShadeRing    []float64     // what a diffuse under a ring is multiplied by: one, or twelve from January; empty if there is no ring
	Directional  [][2]float64  // zenith angle, degrees, and the response to a beam from there over the certificate's; rising; empty if not given
	FieldOfView  float64       // of a pyrheliometer, full opening angle, degrees; 0 if not stated
	Window       string        // of a pyrheliometer: "none", "quartz", "sapphire" or "glass"; empty if not stated
	Offset       Switch        // whether its thermal offset is taken out, after Dutton et al. 2001; see Station.TakesOffset
	Status       string        // channel of the status word of a digital instrument; empty if there is none
	StatusBits   []StatusBit   // in the file's order
	Line         int
}

// A Switch is on, off, or left to the default.
type Switch uint8

const (
	ByDefault Switch = iota
	On
	Off
)

// TakesOffset says whether the thermal offset of an instrument of the station is taken out: where the file says so, else for global and
// diffuse beside a pyrgeometer that sends its own signal. One whose logger converts tells the net longwave only by its case
// temperature, and is used if the file asks for it.
func (st *Station) TakesOffset(in *Instrument) bool {
	if in.Measures != Global && in.Measures != Diffuse || in.Offset == Off {
		return false
	}
	for i := range st.Instruments {
		if l := &st.Instruments[i]; l.Measures == LWDown && l.Primary {
			return l.Input.Case != "" && (l.Input.Signal != "" || in.Offset == On)
		}
	}
	return false
}

// An Input says which channels an instrument reads and in which unit.
type Input struct {
	Signal     string     // channel of the thermopile's voltage; empty if Irradiance is given
	SignalUnit string     // "mV", "uV" or "V"
	Irradiance string     // channel that already holds the quantity's own unit; empty if Signal is given
	Case       string     // channel of the body temperature of a pyrgeometer
	CaseUnit   string     // "degC" (default), "K", "ohm_10k" (thermistor), "ohm_curve" (by Thermistor) or "ohm_pt100"
	Dome       string     // channel of the dome temperature; empty if the dome is coupled or not measured
	DomeUnit   string     // as CaseUnit
	Thermistor [3]float64 // A, B, C of Steinhart and Hart 1968, for temperatures in ohm_curve; all 0 where not given
	SignalMin  float64    // the logger's range in the signal's unit; NaN if not stated
	SignalMax  float64
}

// A Calibration is one period of an instrument's calibration history.
type Calibration struct {
	From, To           time.Time // UTC, half open; zero To is open; one without an end in the file ends where the next begins
	Serial             string
	SensitivityUVPerW  float64 // uV/(W/m2), for par uV/(umol/(m2 s)); above zero, 0 if the logger converts and none is stated
	UncertaintyPercent float64 // k=2; 0 if not stated
	Scale              string  // "WRR", "WISG", "SI" or empty
	Certificate        string
	K1, K2, K3         float64   // pyrgeometer coefficients after Philipona et al. 1995: 0, 1, 0 is the one-temperature form
	ZeroWm2            float64   // subtracted after conversion
	TemperatureCoeff   []float64 // a, b, ...: sensitivity times 1 + a (T-20) + b (T-20)^2 + ..., T in degrees C
	Line               int
}

// A WeatherInput is one weather channel.
type WeatherInput struct {
	Quantity Quantity
	Channel  string
	Unit     string // "degC", "K", "%", "1", "hPa", "Pa", "m/s"
}

// A HousekeepingInput is one housekeeping channel with its sound range; NaN is what the station's limits say for its kind.
type HousekeepingInput struct {
	Name, Channel string
	Low, High     float64
	Kind          HouseKind
	Values        []float64 // the only sound values; empty where the range decides
	Of            []string  // ids of the instruments that a value out of the range is held against
	OfGiven       bool      // Of is from the site file, and may be empty there
}
