package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"io"
	"os"
	"strings"
	"time"

	"gopkg.in/yaml.v3"

	"fluxwarden/qc/minute"
	"fluxwarden/qc/synth"
	"fluxwarden/rules"
)

// cmdSimulate writes what a synthetic station would send, with faults put in on purpose, and beside it the truth.
func cmdSimulate(args []string) int {
	fs := flag.NewFlagSet("simulate", flag.ContinueOnError)
	site := fs.String("site", "", "site file")
	station := fs.String("station", "", "station; may be left out where the file has one")
	from := fs.String("from", "", "begin: a date or RFC 3339")
	to := fs.String("to", "", "end, not included: a date or RFC 3339")
	faults := fs.String("faults", "", "file of faults to put in; none otherwise")
	out := fs.String("out", "", "file of readings to write; the truth goes beside it")
	seed := fs.Uint64("seed", 1, "of the weather and the noise: the same seed gives the same readings")
	climate := fs.String("climate", "", "maritime, desert, tropical or polar; by latitude otherwise")
	if err := fs.Parse(args); err != nil {
		return parseCode(err)
	}
	if *site == "" || *from == "" || *to == "" || *out == "" || fs.NArg() > 0 {
		return complain(exitUsage, errors.New("simulate: want --site FILE --from T --to T --out readings.csv [--station S] [--faults FILE] [--seed N] [--climate NAME]"))
	}
	s, err := loadSimulation(*site, *station, *from, *to, *climate, *seed)
	if err == nil && *faults != "" {
		err = s.addFaults(*faults)
	}
	if err != nil {
		return complain(exitUsage, fmt.Errorf("simulate: %w", err))
	}
	if err := s.write(*out); err != nil {
		return complain(exitProblem, fmt.Errorf("simulate: %w", err))
	}
	return exitOK
}

// A simulation is one station over one time.
type simulation struct {
	station  *synth.Station
	climate  string
	seed     uint64
	from, to minute.Stamp
}

func loadSimulation(file, station, from, to, climate string, seed uint64) (*simulation, error) {
	site, err := rules.Load(file)
	if err != nil {
		return nil, err
	}
	if station == "" && len(site.Stations) == 1 {
		station = site.Stations[0].ID
	}
	st := site.Station(station)
	if st == nil {
		ids := make([]string, len(site.Stations))
		for i := range site.Stations {
			ids[i] = site.Stations[i].ID
		}
		return nil, fmt.Errorf("station %q: %s has %s; name one with --station", station, file, strings.Join(ids, ", "))
	}
	s := &simulation{seed: seed}
	for _, end := range []struct {
		text string
		into *minute.Stamp
	}{{from, &s.from}, {to, &s.to}} {
		t, err := parseInstant(end.text)
		if err != nil {
			return nil, err
		}
		*end.into = minute.Stamp(t.UnixMicro())
	}
	if s.from >= s.to {
		return nil, fmt.Errorf("--from %s is not before --to %s", from, to)
	}
	kind := synth.ClimateFor(st)
	if climate != "" {
		ok := false
		if kind, ok = synth.ClimateNamed(climate); !ok {
			return nil, fmt.Errorf("climate %q: want maritime, desert, tropical or polar", climate)
		}
	}
	s.climate, s.station = kind.Name, synth.New(st, seed, kind)
	return s, nil
}

// A faultFile lists faults to put in. Times are RFC 3339; an amount left out is a usual one.
type faultFile struct {
	Faults []faultEntry `yaml:"faults"`
}

type faultEntry struct {
	Kind       string  `yaml:"kind"`
	Instrument string  `yaml:"instrument"`
	With       string  `yaml:"with"`
	From       string  `yaml:"from"`
	To         string  `yaml:"to"`
	Amount     float64 `yaml:"amount"`
	TowardsDeg float64 `yaml:"towards_deg"`
}

func (s *simulation) addFaults(path string) error {
	text, err := os.ReadFile(path)
	if err != nil {
		return fmt.Errorf("faults: %w", err)
	}
	dec := yaml.NewDecoder(bytes.NewReader(text))
	dec.KnownFields(true)
	var file faultFile
	if err := dec.Decode(&file); err != nil && !errors.Is(err, io.EOF) {
		return fmt.Errorf("faults: %s: %w; write faults: and a list of kind, instrument, with, from, to, amount, towards_deg", path, err)
	}
	for i, e := range file.Faults {
		f, err := e.fault()
		if err == nil {
			err = s.station.AddFault(f)
		}
		if err != nil {
			return fmt.Errorf("faults: %s: entry %d: %w", path, i+1, err)
		}
	}
	return nil
}

func (e *faultEntry) fault() (synth.Fault, error) {
	kind, ok := rules.ParseFaultKind(e.Kind)
	if !ok {
		names := make([]string, rules.FaultKindCount)
		for k := range names {
			names[k] = rules.FaultKind(k).String()
		}
		return synth.Fault{}, fmt.Errorf("kind %q: want one of %s", e.Kind, strings.Join(names, ", "))
	}
	f := synth.Fault{Kind: kind, Instrument: e.Instrument, With: e.With, Amount: e.Amount, TowardsDeg: e.TowardsDeg}
	for _, end := range []struct {
		text string
		into *minute.Stamp
	}{{e.From, &f.From}, {e.To, &f.To}} {
		t, err := parseInstant(end.text)
		if err != nil {
			return f, err
		}
		*end.into = minute.Stamp(t.UnixMicro())
	}
	return f, nil
}

// A faultTruth is one fault as the truth file has it.
type faultTruth struct {
	Kind       string   `json:"kind"`
	Instrument string   `json:"instrument"`
	With       string   `json:"with,omitempty"`
	From       string   `json:"from"`
	To         string   `json:"to"`
	Amount     float64  `json:"amount"`
	AmountUnit string   `json:"amount_unit"`
	TowardsDeg float64  `json:"towards_deg,omitempty"`
	Channels   []string `json:"channels"` // whose values it can change
}

type simulationTruth struct {
	Station   string       `json:"station"`
	Climate   string       `json:"climate"`
	Seed      uint64       `json:"seed"`
	From      string       `json:"from"`
	To        string       `json:"to"`
	Synthetic bool         `json:"synthetic"` // always true: no instrument has measured this
	Values    string       `json:"values"`    // file of what really was, one column an instrument
	Faults    []faultTruth `json:"faults"`
}

func (s *simulation) truth(values string) simulationTruth {
	text := func(at minute.Stamp) string { return time.UnixMicro(int64(at)).UTC().Format(time.RFC3339) }
	t := simulationTruth{Station: s.station.Rules().ID, Climate: s.climate, Seed: s.seed, From: text(s.from), To: text(s.to), Synthetic: true,
		Values: values, Faults: []faultTruth{}}
	for _, f := range s.station.Faults() {
		unit, _ := synth.AmountUnit(f.Kind)
		t.Faults = append(t.Faults, faultTruth{f.Kind.String(), f.Instrument, f.With, text(f.From), text(f.To), f.Amount, unit, f.TowardsDeg, s.station.Channels(f)})
	}
	return t
}

// write makes three files: the readings, what really was, and the faults.
func (s *simulation) write(out string) error {
	base := strings.TrimSuffix(out, ".csv")
	valuesPath, truthPath := base+".true.csv", base+".truth.json"
	if err := s.writeCSVs(out, valuesPath); err != nil {
		return err
	}
	text, err := json.MarshalIndent(s.truth(valuesPath), "", "  ")
	if err != nil {
		return err
	}
	return os.WriteFile(truthPath, append(text, '\n'), 0o644)
}
