package simtest

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"time"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

const site = `network: {id: sim, name: Simulated}
stations:
  - id: anvil
    name: Anvil
    latitude: 47.5
    longitude: 8.5
    elevation: 520
    time: {label: start, interval: 30s}
    instruments:
      - id: G1
        measures: global
        class: A
        input: {irradiance: ghi}
      - id: D1
        measures: diffuse
        class: A
        input: {irradiance: dhi}
    weather: {air_temperature: ta_c}
  - id: birch
    name: Birch
    latitude: -33.1
    longitude: 151.2
    elevation: 40
    time: {label: end, interval: 60s}
    instruments:
      - id: G1
        measures: global
        class: B
        input: {irradiance: ghi}
    weather: {air_temperature: ta_c}
  - id: cairn
    name: Cairn
    latitude: 68.4
    longitude: 17.4
    elevation: 9
    time: {label: start, interval: 20s}
    instruments:
      - id: G1
        measures: global
        class: A
        input: {irradiance: ghi}
`

// The simulated stations and the partitions they are in.
var (
	stationNames = []string{"anvil", "birch", "cairn"}
	partitionOf  = map[string]int{"anvil": 3, "birch": 3, "cairn": 40}
	partitions   = []int{3, 40}
	intervals    = map[string]time.Duration{"anvil": 30 * time.Second, "birch": 60 * time.Second, "cairn": 20 * time.Second}
	channels     = map[string][]string{"anvil": {"ghi", "dhi", "ta_c"}, "birch": {"ghi", "ta_c", "spare"}, "cairn": {"ghi"}}
)

// siteRules is the rules as the worker sees them.
type siteRules struct{ plans map[string]*engine.Plan }

func newRules() (*siteRules, error) {
	s, err := rules.Parse("sim.yaml", []byte(site))
	if err != nil {
		return nil, err
	}
	r := &siteRules{map[string]*engine.Plan{}}
	for i := range s.Stations {
		plan, err := engine.NewPlan(&s.Stations[i])
		if err != nil {
			return nil, err
		}
		r.plans[s.Stations[i].ID] = plan
	}
	return r, nil
}

func (r *siteRules) PlanFor(station string, _ int64) *engine.Plan { return r.plans[station] }
func (r *siteRules) Digest() string                               { return "simulated" }
func (r *siteRules) Stations(partition int) []string {
	var ids []string
	for _, s := range stationNames {
		if partitionOf[s] == partition {
			ids = append(ids, s)
		}
	}
	return ids
}

// An arrival is a reading on its way to the gate.
type arrival struct {
	id      int // its place among all arrivals
	station string
	reading minute.Reading
	at      time.Time
}

// begin is when simulated stations start to send.
var begin = time.Date(2026, 6, 20, 21, 0, 0, 0, time.UTC)

// lastSent is the stamp of every station's last reading.
var lastSent = time.Date(2026, 7, 1, 12, 0, 0, 0, time.UTC)

// planArrivals makes up what the stations send over some days, in windows about midnight and noon, with everything that
// may be wrong with the order of it.
func planArrivals(rng *rand.Rand, days int) []arrival {
	var all []arrival
	for _, station := range stationNames {
		for day := range days {
			for _, hour := range []int{2, 14} { // after begin: 23:00 and 11:00
				if rng.IntN(4) == 0 {
					continue
				}
				from := begin.Add(time.Duration(day*24+hour)*time.Hour + time.Duration(rng.IntN(3600))*time.Second).Truncate(intervals[station])
				dead := rng.IntN(3) == 0 // the first channel says nothing in this window
				held := time.Duration(0)
				if rng.IntN(6) == 0 { // the whole window comes late, as after a lost link
					held = time.Duration(rng.IntN(25)) * time.Hour
				}
				for k := range 10 + rng.IntN(60) {
					at := from.Add(time.Duration(k) * intervals[station])
					r := minute.Reading{At: minute.Stamp(at.UnixMicro()), Values: sample(rng, station, at, dead)}
					all = append(all, send(rng, station, r, at.Add(held))...)
				}
			}
		}
	}
	for _, station := range stationNames { // the month after, so that June is over
		r := minute.Reading{At: minute.Stamp(lastSent.UnixMicro()), Values: sample(rng, station, lastSent, false)}
		all = append(all, arrival{station: station, reading: r, at: lastSent.Add(3 * time.Second)})
	}
	slices.SortStableFunc(all, func(a, b arrival) int { return a.at.Compare(b.at) })
	for i := range all {
		all[i].id = i
	}
	return all
}

func sample(rng *rand.Rand, station string, at time.Time, dead bool) []minute.ChannelValue {
	var values []minute.ChannelValue
	hour := float64(at.Hour()) + float64(at.Minute())/60
	for i, c := range channels[station] {
		v := math.Round(400-300*math.Cos(hour/12*math.Pi)+20*rng.NormFloat64()) / float64(1+i)
		if dead && i == 0 {
			v = 0
		}
		if rng.IntN(40) == 0 {
			continue
		}
		values = append(values, minute.ChannelValue{Channel: c, Value: minute.Single(v)})
	}
	return values
}

// send gives the arrivals of one reading: late or not, once or more, whole or in parts, and now and then contradicted.
func send(rng *rand.Rand, station string, r minute.Reading, sent time.Time) []arrival {
	delay := time.Duration(rng.IntN(4000)) * time.Millisecond
	switch rng.IntN(60) {
	case 0, 1, 2, 3:
		delay = time.Duration(rng.IntN(600)) * time.Second
	case 4:
		delay = time.Duration(rng.IntN(26*60)) * time.Minute
	case 5, 6:
		delay = -time.Duration(rng.IntN(180)) * time.Second // a clock that is ahead
	}
	one := arrival{station: station, reading: r, at: sent.Add(delay)}
	all := []arrival{one}
	switch rng.IntN(20) {
	case 0, 1: // again
		again := one
		span := 600
		if rng.IntN(8) == 0 {
			span = 30 * 3600
		}
		again.at = again.at.Add(time.Duration(rng.IntN(span)) * time.Second)
		all = append(all, again)
	case 2: // in two parts
		if n := len(r.Values); n > 1 {
			rest := one
			rest.reading.Values, all[0].reading.Values = r.Values[n-1:], r.Values[:n-1]
			rest.at = rest.at.Add(time.Duration(rng.IntN(300)) * time.Second)
			all = append(all, rest)
		}
	case 3: // contradicted
		if len(r.Values) > 0 {
			other := one
			v := r.Values[0]
			v.Value = minute.Single(v.Mean + float64(rng.IntN(7)-3))
			other.reading.Values = []minute.ChannelValue{v}
			other.at = other.at.Add(time.Duration(rng.IntN(7200)) * time.Second)
			all = append(all, other)
		}
	}
	return all
}

func describe(r *minute.Reading) string {
	return fmt.Sprintf("%s %v", time.UnixMicro(int64(r.At)).UTC().Format(time.RFC3339), r.Values)
}
