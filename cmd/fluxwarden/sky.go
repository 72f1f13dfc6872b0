package main

import (
	"bufio"
	"errors"
	"flag"
	"fmt"
	"io"
	"math"
	"os"
	"strconv"
	"strings"
	"text/tabwriter"
	"time"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/limit"
	"fluxwarden/rules"
)

// skyRowsMax bounds one listing.
const skyRowsMax = 10_000_000

// cmdSky prints what the judge expects at the instants asked for.
func cmdSky(args []string) int {
	fs := flag.NewFlagSet("sky", flag.ContinueOnError)
	archive := fs.String("archive", "", "folder of an archive: print the learnt sky that its past minutes were judged by")
	site := fs.String("site", "", "site file; with --archive only if its newest rules are not meant")
	station := fs.String("station", "", "station; may be left out where the site file has one")
	from := fs.String("from", "", "first instant: a date or RFC 3339")
	to := fs.String("to", "", "end, not included")
	step := fs.Duration("step", time.Minute, "time between rows")
	format := fs.String("format", "table", "csv or table")
	if err := fs.Parse(args); err != nil {
		return parseCode(err)
	}
	if *site == "" && *archive == "" || *from == "" || *to == "" || fs.NArg() > 0 || *step <= 0 || *format != "csv" && *format != "table" {
		return complain(exitUsage, errSkyUsage)
	}
	begin, err1 := parseInstant(*from)
	end, err2 := parseInstant(*to)
	if err := errors.Join(err1, err2); err != nil {
		return complain(exitUsage, fmt.Errorf("sky: %w", err))
	}
	if !begin.Before(end) || end.Sub(begin) / *step > skyRowsMax {
		return complain(exitUsage, fmt.Errorf("sky: from %s to %s in steps of %s: want at least one row and at most %d", *from, *to, *step, skyRowsMax))
	}
	if *archive != "" {
		q := &skyQuery{archive: *archive, site: *site, station: *station, begin: begin, end: end, step: *step}
		if err := printArchiveSky(q, *format); err != nil {
			return complain(exitProblem, fmt.Errorf("sky: %w", err))
		}
		return exitOK
	}
	s, err := rules.Load(*site)
	if err != nil {
		return complain(exitUsage, err)
	}
	st, err := pickStation(s, *station)
	if err != nil {
		return complain(exitUsage, fmt.Errorf("sky: %w", err))
	}
	plan, err := engine.NewPlan(st)
	if err != nil {
		return complain(exitUsage, fmt.Errorf("sky: %w", err))
	}
	err = printed(os.Stdout, *format, func(w io.Writer, sep string) error { return printSky(w, plan, st, begin, end, *step, sep) })
	if err != nil {
		return complain(exitProblem, fmt.Errorf("sky: %w", err))
	}
	return exitOK
}

// printed writes rows as CSV or as an aligned table.
func printed(to io.Writer, format string, rows func(w io.Writer, sep string) error) error {
	out := bufio.NewWriter(to)
	if format == "csv" {
		return errors.Join(rows(out, ","), out.Flush())
	}
	t := tabwriter.NewWriter(out, 0, 4, 2, ' ', tabwriter.AlignRight)
	return errors.Join(rows(t, "\t"), t.Flush(), out.Flush())
}

// limitColumns are the bounds printed, low and high each: of every limit that the sun and the station alone decide.
func limitColumns(st *rules.Station) (names []string, bounds func(s *limit.Sun) []float64) {
	l := &st.Limits
	sunGroups := []struct {
		name   string
		limits *[4]rules.SunLimit
	}{{"possible", &l.Possible}, {"rare", &l.Rare}}
	bandGroups := []struct {
		name  string
		bands *[2]rules.Band
	}{{"possible", &l.PossibleLW}, {"rare", &l.RareLW}}
	for _, g := range sunGroups {
		for q := range g.limits {
			key := g.name + "_" + rules.Quantity(q).String()
			names = append(names, key+"_low", key+"_high")
		}
	}
	for _, g := range bandGroups {
		for k := range g.bands {
			key := g.name + "_" + (rules.LWDown + rules.Quantity(k)).String()
			names = append(names, key+"_low", key+"_high")
		}
	}
	return names, func(s *limit.Sun) []float64 {
		var out []float64
		for _, g := range sunGroups {
			for k := range g.limits {
				x := &g.limits[k]
				out = append(out, x.Low, limit.SunMax(x, s))
			}
		}
		for _, g := range bandGroups {
			for _, b := range g.bands {
				out = append(out, b.Low, b.High)
			}
		}
		return out
	}
}

func printSky(w io.Writer, plan *engine.Plan, st *rules.Station, begin, end time.Time, step time.Duration, sep string) error {
	names, bounds := limitColumns(st)
	header := append([]string{"time", "zenith_deg", "apparent_zenith_deg", "azimuth_deg", "sun_distance_au", "extraterrestrial_normal",
		"extraterrestrial_horizontal", "clear_global", "clear_direct", "clear_diffuse", "clear_lw_down"}, names...)
	tail := ""
	if sep == "\t" {
		tail = "\t" // an aligned cell ends with a tab
	}
	if _, err := fmt.Fprintln(w, strings.Join(header, sep)+tail); err != nil {
		return err
	}
	for t := begin; t.Before(end); t = t.Add(step) {
		e := plan.Expect(t.UnixMicro())
		cells := []string{t.Format(time.RFC3339Nano), number(e.ZenithDeg, 6), number(e.ApparentZenithDeg, 6), number(e.AzimuthDeg, 6),
			number(e.DistanceAU, 9), number(e.ExtraterrestrialWm2, 3), number(e.ExtraterrestrialHorizontalWm2, 3),
			number(e.Clear.GlobalWm2, 3), number(e.Clear.DirectWm2, 3), number(e.Clear.DiffuseWm2, 3), number(e.ClearLWDownWm2, 3)}
		for _, b := range bounds(&e.Sun) {
			cells = append(cells, number(b, 3))
		}
		if _, err := fmt.Fprintln(w, strings.Join(cells, sep)+tail); err != nil {
			return err
		}
	}
	return nil
}

func number(v float64, digits int) string {
	if math.IsNaN(v) {
		return ""
	}
	return strconv.FormatFloat(v, 'f', digits, 64)
}
