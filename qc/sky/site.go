package sky

import (
	"math"

	"fluxwarden/qc/exact"
	"fluxwarden/qc/sun"
)

// A Model is one of the cloudless-sky models that a station may choose.
type Model uint8

const (
	BirdHulstrom    Model = iota // Bird and Hulstrom 1981
	Ineichen                     // Ineichen and Perez 2002
	SimplifiedSolis              // Ineichen 2008
	modelCount      = iota
)

var modelNames = [modelCount]string{"bird", "ineichen", "solis"}

func (m Model) String() string { return modelNames[m] }

// ParseModel gives the model of a name.
func ParseModel(name string) (Model, bool) {
	for i, n := range modelNames {
		if n == name {
			return Model(i), true
		}
	}
	return 0, false
}

// A State is what a cloudless sky depends on beside the sun.
type State struct {
	Aerosol     float64 // broadband optical depth as the model takes it, 0..AerosolMax: Bird's tau_A, Solis' depth at 700 nm
	WaterCm     float64 // precipitable water, 0.05..10
	OzoneCm     float64 // 0.05..0.7
	Albedo      float64 // of the ground, 0..1
	PressureHPa float64 // at the station, 300..1100
}

// AerosolMax is the greatest load that is told from cloud: the thickest smoke and dust that leave a beam.
const AerosolMax = 3

// DefaultState is what is assumed where neither the site file nor the days before say anything, at a pressure in hPa: a rural load of
// temperate land, 1.5 cm of water, 300 Dobson units, grass (common practice).
func DefaultState(pressureHPa float64) State {
	return State{Aerosol: 0.1, WaterCm: 1.5, OzoneCm: 0.3, Albedo: 0.2, PressureHPa: pressureHPa}
}

// A Site is a model at one place, with all that depends on neither the day nor the air worked out once. It is read only.
type Site struct {
	model      Model
	elevationM float64
	nodes      []birdNode // of the Bird model, one a degree of the zenith angle, 0..90
	pressure   float64    // that the nodes are worked out at, hPa
}

// NewSite takes the elevation in metres (-430..9000) and its usual pressure in hPa (300..1100).
func NewSite(model Model, elevationM, pressureHPa float64) *Site {
	s := &Site{model: model, elevationM: elevationM, pressure: pressureHPa}
	if model == BirdHulstrom {
		s.nodes = make([]birdNode, gridNodes)
		for i := range s.nodes {
			s.nodes[i] = newBirdNode(float64(i), pressureHPa)
		}
	}
	return s
}

// Model is the model of the site.
func (s *Site) Model() Model { return s.model }

// At is the cloudless irradiance at an apparent zenith angle of 0 to 90 degrees. Beyond: nothing.
func (s *Site) At(apparentZenithDeg, extraterrestrialWm2 float64, st *State) Irradiance {
	if !(apparentZenithDeg >= 0 && apparentZenithDeg <= 90) {
		return Irradiance{}
	}
	var share Irradiance
	if s.model == BirdHulstrom {
		n := newBirdNode(apparentZenithDeg, s.pressure)
		share = n.share(st, s.pressure, newBirdAerosol(st.Aerosol))
	} else {
		share = s.whole(apparentZenithDeg, st)
	}
	return share.times(extraterrestrialWm2)
}

// whole is the share of the extraterrestrial irradiance that the other two models give.
func (s *Site) whole(zenithDeg float64, st *State) Irradiance {
	switch s.model {
	case Ineichen:
		cosZenith := exact.Cos(zenithDeg * (math.Pi / 180))
		site := NewIneichenSite(LinkeOfAerosol(st), s.elevationM)
		out, _ := site.At(cosZenith, sun.AirMassAtPressure(sun.AirMassKastenYoung(zenithDeg), st.PressureHPa), 1)
		return out
	default:
		out, _ := Solis(SolisInput{ElevationDeg: 90 - zenithDeg, AOD700: min(st.Aerosol, solisAerosolMax), WaterCm: st.WaterCm,
			PressureHPa: max(st.PressureHPa, 400), ExtraterrestrialWm2: 1})
		return out
	}
}

func (i Irradiance) times(by float64) Irradiance {
	return Irradiance{GlobalWm2: float64(i.GlobalWm2 * by), DirectWm2: float64(i.DirectWm2 * by), DiffuseWm2: float64(i.DiffuseWm2 * by)}
}

const (
	solisAerosolMax = 0.45
	// broadbandTo550 turns a broadband depth, 0.2758 tau380 + 0.35 tau500 of Bird and Hulstrom, into that at 550 nm for an Angstrom exponent
	// of 1.3: (550/500)^-1.3 / (0.2758 (380/500)^-1.3 + 0.35).
	broadbandTo550 = 1.1875
)

// LinkeOfAerosol is the Linke turbidity at air mass 2 of an aerosol load and water column, 1..15:
// 3.91 exp(0.689 p0/p) tau550 + 0.376 ln w + 2 + 0.54 p0/p - 0.5 (p0/p)^2 + 0.16 (p0/p)^3. Source: Ineichen 2008, Solar Energy 82, 1095
// (from memory). Worked value: 3.277 at 0.1 (0.119 at 550 nm), 1.5 cm, sea level.
func LinkeOfAerosol(st *State) float64 {
	q := linkePressure / st.PressureHPa
	t := float64(3.91*exact.Exp(float64(0.689*q))*broadbandTo550*st.Aerosol) + float64(0.376*exact.Log(max(st.WaterCm, 0.05))) +
		2 + float64(0.54*q) - float64(0.5*q*q) + float64(0.16*q*q*q)
	return min(max(t, 1), 15)
}

const linkePressure = 1013.25
