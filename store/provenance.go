package store

import (
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"path"
	"slices"
	"strconv"
	"strings"
	"sync"
	"time"

	"fluxwarden/rules"
	"fluxwarden/store/product"
	"fluxwarden/store/table"
)

// sites are rule sets that were read from the archive, by their digests.
type sites struct {
	mu sync.Mutex
	by map[string]*rules.Site
}

// site is the rule set of a commit: the caller's own, or the one that the archive keeps by its digest; nil where it keeps none.
func (d *draft) site() (*rules.Site, error) {
	if d.c.Site != nil || d.c.RulesDigest == "" {
		return d.c.Site, nil
	}
	return d.a.siteOf(d.c.RulesDigest)
}

func (a *Archive) siteOf(digest string) (*rules.Site, error) {
	a.sites.mu.Lock()
	defer a.sites.mu.Unlock()
	if s, ok := a.sites.by[digest]; ok {
		return s, nil
	}
	text, err := a.Rules(digest)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, nil // and it may come yet
	}
	if err != nil {
		return nil, err
	}
	name := path.Join("rules", digest+".yaml")
	s, err := rules.Parse(name, text)
	if err != nil {
		return nil, fmt.Errorf("%s: the rule set of this commit cannot be read: %w; move it away and start again with the site file", name, err)
	}
	if a.sites.by == nil {
		a.sites.by = map[string]*rules.Site{}
	}
	a.sites.by[digest] = s
	return s, nil
}

func settingsOf(site *rules.Site, station string) product.Settings {
	if site == nil || site.Station(station) == nil {
		return product.Settings{}
	}
	return product.Settings{NightZero: site.Station(station).Products.NightZero}
}

// A usedCalibration is what a file says of a calibration that its rows rest on.
type usedCalibration struct {
	Instrument  string  `json:"instrument"`
	Measures    string  `json:"measures"`
	Class       string  `json:"class,omitempty"`
	Serial      string  `json:"serial,omitempty"`
	From        string  `json:"from,omitempty"`
	To          string  `json:"to,omitempty"`
	Sensitivity float64 `json:"sensitivity_uv_per_unit,omitempty"`
	Uncertainty float64 `json:"uncertainty_percent,omitempty"`
	Scale       string  `json:"scale,omitempty"`
	Certificate string  `json:"certificate,omitempty"`
}

// provenance is what a file says of where its rows are from: the network's words, the place, and the calibrations in force in its period.
func provenance(site *rules.Site, station, period string) map[string]string {
	m := map[string]string{}
	if site == nil {
		return m
	}
	set := func(key, value string) {
		if value != "" {
			m[key] = value
		}
	}
	n := &site.Network
	set("network", n.ID)
	set("network_name", n.Name)
	set("contact", n.Contact)
	set("licence", n.Licence)
	set("citation", n.Citation)
	st := site.Station(station)
	if st == nil {
		return m
	}
	number := func(x float64) string { return strconv.FormatFloat(x, 'g', -1, 64) }
	set("station_name", st.Name)
	m["latitude_deg"], m["longitude_deg"], m["elevation_m"] = number(st.LatitudeDeg), number(st.LongitudeDeg), number(st.ElevationM)
	if text, err := json.Marshal(calibrationsOf(st, period)); err == nil {
		m["calibrations"] = string(text)
	}
	return m
}

// calibrationsOf lists the calibrations of a station that hold at some time of the period; an instrument without one is listed too.
func calibrationsOf(st *rules.Station, period string) []usedCalibration {
	list := []usedCalibration{}
	var begin, end time.Time
	if from, to, err := span(period); period != "" && err == nil {
		begin, end = dayTime(from), dayTime(to)
	}
	for i := range st.Instruments {
		in := &st.Instruments[i]
		about := usedCalibration{Instrument: in.ID, Measures: in.Measures.String(), Class: in.Class, Serial: in.Serial}
		if len(in.Calibrations) == 0 {
			list = append(list, about)
		}
		for k := range in.Calibrations {
			c := &in.Calibrations[k]
			if !end.IsZero() && !c.From.Before(end) || !begin.IsZero() && !c.To.IsZero() && !c.To.After(begin) {
				continue
			}
			x := about
			if c.Serial != "" {
				x.Serial = c.Serial
			}
			x.From = c.From.UTC().Format(time.RFC3339)
			if !c.To.IsZero() {
				x.To = c.To.UTC().Format(time.RFC3339)
			}
			x.Sensitivity, x.Uncertainty, x.Scale, x.Certificate = c.SensitivityUVPerW, c.UncertaintyPercent, c.Scale, c.Certificate
			list = append(list, x)
		}
	}
	return list
}

// udunits are the units of a site file's channels in UDUNITS form; those that are not in it are written alike.
var udunits = map[string]string{"W/m2": "W m-2", "umol/(m2 s)": "umol m-2 s-1", "degC": "degree_Celsius", "%": "percent", "m/s": "m s-1", "ohm_10k": "ohm", "ohm_pt100": "ohm"}

// withUnits says of the channels of a station's readings what the site file says of them.
func withUnits(columns []table.Column, site *rules.Site, station string) []table.Column {
	if site == nil || site.Station(station) == nil {
		return columns
	}
	units, about := channelsOf(site.Station(station))
	columns = slices.Clone(columns)
	for i := range columns {
		name, statistic, _ := strings.Cut(columns[i].Name, ":")
		if about[name] == "" {
			continue
		}
		columns[i].Description = about[name] + ", as received"
		if statistic == "n" {
			columns[i].Description = about[name] + ": samples"
		} else if columns[i].Unit = units[name]; udunits[units[name]] != "" {
			columns[i].Unit = udunits[units[name]]
		}
	}
	return columns
}

// channelsOf gives the units of a station's channels, and what they are.
func channelsOf(st *rules.Station) (units, about map[string]string) {
	units, about = map[string]string{}, map[string]string{}
	set := func(channel, unit, what string) {
		if channel != "" {
			units[channel], about[channel] = unit, what
		}
	}
	for i := range st.Instruments {
		in := &st.Instruments[i]
		p := &in.Input
		set(p.Signal, p.SignalUnit, "signal of "+in.ID+", "+in.Measures.String())
		set(p.Irradiance, in.Measures.Unit(), in.Measures.String()+" of "+in.ID)
		set(p.Case, p.CaseUnit, "body temperature of "+in.ID)
		set(p.Dome, p.DomeUnit, "dome temperature of "+in.ID)
	}
	for _, w := range st.Weather {
		set(w.Channel, w.Unit, w.Quantity.String())
	}
	for _, h := range st.Housekeeping {
		set(h.Channel, "", "housekeeping: "+h.Name)
	}
	return units, about
}
