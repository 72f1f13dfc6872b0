package synth

import (
	"math"

	"fluxwarden/rules"
)

// A Climate is the weather that a synthetic station has. The numbers are our own choice.
type Climate struct {
	Name string

	ClearShare, BrokenShare float64 // of the time; the rest is overcast
	OvercastDepth           float64 // usual optical depth of a closed cloud
	CloudBaseK              float64 // how much colder than the air at the screen a closed cloud's base is

	AOD     float64 // usual aerosol optical depth at 500 nm
	OzoneCm float64

	MeanC          float64 // the year's, at the station's own height
	SeasonC        float64 // half the range of the year
	DayC           float64 // half the range of a clear day
	WeatherC       float64 // how far days differ, standard deviation
	DewDepressionK float64 // of the day's mean temperature
	WindMs         float64

	Albedo       float64 // of the bare ground
	SnowAlbedo   float64 // while the season's mean is below freezing
	GroundHeatsK float64 // how much warmer than the air the ground gets under a high clear sun
}

// The climates that stations can be given.
var (
	// Maritime is a cool coast or moor: cloud comes and goes, often closed.
	Maritime = Climate{Name: "maritime", ClearShare: 0.22, BrokenShare: 0.43, OvercastDepth: 18, CloudBaseK: 6, AOD: 0.08, OzoneCm: 0.34,
		MeanC: 7, SeasonC: 6, DayC: 3.5, WeatherC: 2.5, DewDepressionK: 2.5, WindMs: 5, Albedo: 0.19, SnowAlbedo: 0.6, GroundHeatsK: 9}
	// Desert is a dry plateau under a clear sky, with a bright hot ground.
	Desert = Climate{Name: "desert", ClearShare: 0.72, BrokenShare: 0.24, OvercastDepth: 10, CloudBaseK: 14, AOD: 0.12, OzoneCm: 0.28,
		MeanC: 19, SeasonC: 8, DayC: 7.5, WeatherC: 2, DewDepressionK: 18, WindMs: 4, Albedo: 0.33, SnowAlbedo: 0.33, GroundHeatsK: 15}
	// Tropical is a warm sea: cumulus all day, showers.
	Tropical = Climate{Name: "tropical", ClearShare: 0.18, BrokenShare: 0.62, OvercastDepth: 22, CloudBaseK: 8, AOD: 0.1, OzoneCm: 0.26,
		MeanC: 27.5, SeasonC: 1, DayC: 2, WeatherC: 0.7, DewDepressionK: 3.5, WindMs: 6, Albedo: 0.12, SnowAlbedo: 0.12, GroundHeatsK: 6}
	// Polar is a high-latitude coast: low sun, snow for most of the year, thin stratus.
	Polar = Climate{Name: "polar", ClearShare: 0.33, BrokenShare: 0.29, OvercastDepth: 11, CloudBaseK: 4, AOD: 0.05, OzoneCm: 0.36,
		MeanC: -7, SeasonC: 11, DayC: 1.2, WeatherC: 2.5, DewDepressionK: 3, WindMs: 6, Albedo: 0.17, SnowAlbedo: 0.78, GroundHeatsK: 2}
)

// Climates lists them.
func Climates() []Climate { return []Climate{Maritime, Desert, Tropical, Polar} }

// ClimateNamed finds a climate by its name.
func ClimateNamed(name string) (Climate, bool) {
	for _, c := range Climates() {
		if c.Name == name {
			return c, true
		}
	}
	return Climate{}, false
}

// ClimateFor guesses a climate from where a station stands.
func ClimateFor(st *rules.Station) Climate {
	switch latitude := math.Abs(st.LatitudeDeg); {
	case latitude > 62:
		return Polar
	case latitude > 36:
		return Maritime
	case latitude > 16:
		return Desert
	}
	return Tropical
}
