package rules

import "strings"

// A Test is one check on a minute. The list is closed and only grows at its end: the numbers stand in archives.
type Test uint8

const (
	Missing      Test = iota // the minute has no value of the quantity
	Sampling                 // fewer samples than the logger's interval promises
	Clock                    // the stamp was ahead of the time of receipt
	Conflict                 // two different values under one stamp
	Signal                   // open circuit, saturation or a logger's mark in the raw signal; an implausible body temperature
	Possible                 // physically possible limit
	Rare                     // extremely rare limit
	Stuck                    // the same value for too long
	Spike                    // a jump that neither neighbour shares
	NightZero                // night value of a shortwave instrument outside its class's offset
	Closure                  // global against direct on the horizontal plus diffuse
	DiffuseRatio             // diffuse against global
	Albedo                   // reflected against what came down
	LWAir                    // longwave against air temperature
	LWPair                   // longwave down against up
	Rayleigh                 // diffuse below what a clean sky scatters
	ClearSky                 // global or direct far above the learnt clear sky; lw_down outside of what clear and overcast skies give
	Partner                  // two instruments of one quantity disagree
	Housekeeping             // fan, supply, tracker or status word out of range
	Local                    // a test of the site's own, written in CEL
	TestCount    = iota
)

var testNames = [TestCount]string{"missing", "sampling", "clock", "conflict", "signal", "possible", "rare", "stuck", "spike", "night_zero",
	"closure", "diffuse_ratio", "albedo", "lw_air", "lw_pair", "rayleigh", "clear_sky", "partner", "housekeeping", "local"}

func (t Test) String() string { return testNames[t] }

// ParseTest gives the test of a name.
func ParseTest(name string) (Test, bool) {
	for i, n := range testNames {
		if n == name {
			return Test(i), true
		}
	}
	return 0, false
}

// A TestSet is a set of tests, one bit a test.
type TestSet uint32

// Of is the set with just this test.
func (t Test) Of() TestSet { return 1 << t }

// Has says whether the set holds the test.
func (s TestSet) Has(t Test) bool { return s>>t&1 == 1 }

// Join writes the names in the list's order with sep between.
func (s TestSet) Join(sep string) string {
	var b strings.Builder
	for t := Test(0); t < TestCount; t++ {
		if s.Has(t) {
			if b.Len() > 0 {
				b.WriteString(sep)
			}
			b.WriteString(testNames[t])
		}
	}
	return b.String()
}

// An Outcome is what a test said of one minute: pass, miss, or not applicable with the reason. The list is closed.
type Outcome uint8

const (
	NotRun       Outcome = iota // the station has no such instrument, or the test is switched off there
	Pass                        //
	Miss                        //
	NoValue                     // the quantity has no value this minute
	NoPartner                   // the quantity to compare with has no usable value
	SunTooLow                   // the sun is too low for the test to mean anything
	SunUp                       // a night test by day
	SunHidden                   // the sun is behind the horizon mask
	TooSmall                    // the reference is too small to compare with
	NoWeather                   // air temperature, humidity or pressure is not there or not plausible
	NoHistory                   // not enough earlier minutes to compare with
	NotLearnt                   // the site's own clear sky is not known yet
	EclipseNow                  // the moon covers part of the sun
	RuleBroken                  // an expression of the site's own could not be worked out
	OutcomeCount = iota
)

var outcomeNames = [OutcomeCount]string{"not_run", "pass", "miss", "no_value", "no_partner", "sun_too_low", "sun_up", "sun_hidden",
	"too_small", "no_weather", "no_history", "not_learnt", "eclipse", "rule_broken"}

func (o Outcome) String() string { return outcomeNames[o] }

// Applied says whether the test gave a pass or a miss.
func (o Outcome) Applied() bool { return o == Pass || o == Miss }
