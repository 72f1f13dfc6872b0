package store

import (
	"math"
	"math/rand/v2"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// madeDay makes a judged day of a station with three irradiances and three weather channels, as noisy as real ones: a random walk at the
// resolution of a logger, 0.01.
func madeDay(station string, day int64, rng *rand.Rand) *engine.Judged {
	j := &engine.Judged{Station: station, Day: day, Rows: minute.PerDay, Records: make([]uint16, minute.PerDay)}
	walk := func(start, step, grid float64) []float64 {
		out := make([]float64, minute.PerDay)
		x := start
		for i := range out {
			x += step * rng.NormFloat64()
			out[i] = math.Round(x/grid) * grid
		}
		return out
	}
	smooth := func(amplitude, phase float64) []float64 {
		out := make([]float64, minute.PerDay)
		for i := range out {
			out[i] = amplitude*math.Cos(2*math.Pi*(float64(i)/minute.PerDay+phase)) + 0.01*float64(day%31)
		}
		return out
	}
	for i := range j.Records {
		j.Records[i] = 60
	}
	j.ZenithDeg, j.ApparentZenithDeg, j.AzimuthDeg, j.CosZenith = smooth(40, 0.5), smooth(40, 0.5), smooth(180, 0.25), smooth(1, 0.5)
	j.ExtraterrestrialWm2 = smooth(0.2, 0)
	j.ClearGlobalWm2, j.ClearDirectWm2, j.ClearDiffuseWm2, j.ClearLWDownWm2 = smooth(800, 0.5), smooth(900, 0.5), smooth(90, 0.5), smooth(30, 0.5)
	add := func(q rules.Quantity, start, step, grid float64) {
		s := engine.Series{Instrument: q.String(), Quantity: q, Primary: true, Measured: walk(start, step, grid), N: make([]uint32, minute.PerDay),
			Verdict: make([]rules.Verdict, minute.PerDay), Missed: make([]rules.TestSet, minute.PerDay), Passed: make([]rules.TestSet, minute.PerDay),
			Faults: make([]rules.FaultSet, minute.PerDay), Restored: make([]bool, minute.PerDay)}
		s.Value = append([]float64(nil), s.Measured...)
		s.SD, s.U95 = walk(3, 0.1, 1e-6), walk(12, 0.05, 1e-6)
		s.Min, s.Max = append([]float64(nil), s.Value...), append([]float64(nil), s.Value...)
		for i := range s.Value {
			s.N[i], s.Verdict[i], s.Passed[i] = 60, rules.Accepted, 0xff
			d := math.Abs(rng.NormFloat64()) * step
			s.Min[i] -= math.Round(d*100) / 100
			s.Max[i] += math.Round(d*110) / 100
			switch {
			case i%97 == 5:
				s.Verdict[i], s.Missed[i], s.Passed[i] = rules.Questioned, rules.Spike.Of()|rules.Closure.Of(), 0xff&^rules.Spike.Of()
			case i%211 == 7:
				s.Verdict[i], s.Faults[i] = rules.Rejected, rules.DomeWet.Of()
			case i%331 == 9:
				s.Verdict[i], s.N[i] = rules.Absent, 0
				s.Value[i], s.Measured[i], s.SD[i], s.Min[i], s.Max[i], s.U95[i] = math.NaN(), math.NaN(), math.NaN(), math.NaN(), math.NaN(), math.NaN()
			}
		}
		j.Series = append(j.Series, s)
	}
	add(rules.Global, 400, 5, 0.01)
	add(rules.Direct, 500, 6, 0.01)
	add(rules.Diffuse, 100, 2, 0.01)
	add(rules.AirTemperature, 15, 0.02, 0.01)
	add(rules.Humidity, 60, 0.1, 0.1)
	add(rules.Pressure, 950, 0.02, 0.1)
	return j
}

func madeBatch(station string, day int64, rows int, rng *rand.Rand) *minute.Batch {
	b := &minute.Batch{Station: station}
	for range rows {
		at := minute.Stamp(day*minute.MicrosPerDay + rng.Int64N(minute.MicrosPerDay))
		r := minute.Reading{At: at, Values: []minute.ChannelValue{{Channel: "g1_mv", Value: minute.Single(rng.NormFloat64())}}}
		if rng.IntN(2) == 0 {
			r.Received = at + 1000
		}
		if rng.IntN(3) == 0 {
			r.Values = append(r.Values, minute.ChannelValue{Channel: "ta_c", Value: minute.Value{Mean: rng.Float64(), SD: 0.1, Min: -1, Max: 2, N: 7}})
		}
		b.Append(&r)
	}
	return b
}

func madeEpisode(station string) fault.Episode {
	return fault.Episode{ID: station + "-1", Rev: 2, Station: station, Instrument: "G1", Kind: rules.DomeWet, Also: []rules.FaultKind{rules.DomeSnow},
		Severity: rules.Act, From: 29_700_000, To: fault.Open, Raised: 29_700_010, Confidence: 0.91,
		Evidence: []fault.Evidence{{Name: "ratio", Value: 0.8, Unit: "1"}}, Advice: "dry the dome"}
}
