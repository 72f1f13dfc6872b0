package synth

import (
	"math"
	"testing"
	"time"

	"fluxwarden/qc/minute"
	"fluxwarden/qc/sensor"
	"fluxwarden/rules"
)

// places are the stations that the tests stand on, one a climate.
var places = []struct {
	file, id string
	climate  Climate
}{
	{"northmoor.yaml", "northmoor", Maritime},
	{"saltpan.yaml", "saltpan-1", Desert},
	{"coralkey.yaml", "coralkey", Tropical},
	{"coralkey.yaml", "frostbight", Polar},
}

func stationOf(t testing.TB, place int, seed uint64) *Station {
	t.Helper()
	p := places[place]
	site, err := rules.Load("../../testdata/site/" + p.file)
	if err != nil {
		t.Fatal(err)
	}
	return New(site.Station(p.id), seed, p.climate)
}

func stamp(t testing.TB, text string) minute.Stamp {
	t.Helper()
	at, err := time.Parse(time.RFC3339, text)
	if err != nil {
		t.Fatal(err)
	}
	return minute.Stamp(at.UnixMicro())
}

func channel(r *minute.Reading, name string) float64 {
	for _, v := range r.Values {
		if v.Channel == name {
			return v.Mean
		}
	}
	return math.NaN()
}

// measured turns an instrument's channels back into its own unit, by the certificate alone.
func measured(s *Station, r *minute.Reading, id string) float64 {
	d := &s.instruments[s.index(id)]
	in := &d.rules.Input
	if in.Irradiance != "" {
		return channel(r, in.Irradiance)
	}
	cal := d.calibration(int64(s.start(r.At)) / minute.MicrosPerSecond)
	microvolts := channel(r, in.Signal) * microvoltsPer(in.SignalUnit)
	if !d.rules.Measures.Longwave() {
		return sensor.Radiometer{SensitivityUVPerWm2: cal.SensitivityUVPerW, ZeroOffsetWm2: cal.ZeroWm2}.Irradiance(microvolts/1000, 20)
	}
	caseK := kelvin(channel(r, in.Case), in.CaseUnit)
	domeK := caseK
	if in.Dome != "" {
		domeK = kelvin(channel(r, in.Dome), in.DomeUnit)
	}
	return sensor.Philipona{K1: cal.K1, K2: cal.K2, K3: cal.K3}.Flux(microvolts/cal.SensitivityUVPerW, caseK, domeK) - cal.ZeroWm2
}

func kelvin(v float64, unit string) float64 {
	switch unit {
	case "K":
		return v
	case "ohm_10k":
		return sensor.Thermistor10k.TemperatureK(v)
	case "ohm_pt100":
		return sensor.PlatinumC(v, 100) + sensor.ZeroCelsiusK
	}
	return v + sensor.ZeroCelsiusK
}
