package main

import (
	"bufio"
	"errors"
	"flag"
	"fmt"
	"io"
	"math"
	"os"
	"strings"
	"text/tabwriter"
	"time"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/limit"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/uncertainty"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// A budgetRequest is what the flags of budget ask for. NaN stands for a number that was not given.
type budgetRequest struct {
	station    *rules.Station
	plan       *engine.Plan
	instrument *rules.Instrument
	at         time.Time // start of the minute
	archive    string    // empty where the flags tell the minute

	value, beamWm2, zenithDeg, netWm2, bodyC float64
}

// cmdBudget prints the parts that an instrument's uncertainty is made of, in one minute.
func cmdBudget(args []string) int {
	fs := flag.NewFlagSet("budget", flag.ContinueOnError)
	site := fs.String("site", "", "site file")
	station := fs.String("station", "", "station; may be left out where the site file has one")
	instrument := fs.String("instrument", "", "instrument, by its id in the site file")
	at := fs.String("time", "", "start of the minute, UTC: a date or RFC 3339; now otherwise")
	archive := fs.String("archive", "", "folder of the archive that has the minute's readings")
	q := budgetRequest{}
	fs.Float64Var(&q.value, "irradiance", math.NaN(), "value in the quantity's unit, instead of an archive")
	fs.Float64Var(&q.beamWm2, "beam", math.NaN(), "direct normal irradiance, W/m2; estimated from global otherwise")
	fs.Float64Var(&q.zenithDeg, "zenith", math.NaN(), "zenith angle of the sun, degrees; from the time otherwise")
	fs.Float64Var(&q.netWm2, "net", math.NaN(), "net longwave, W/m2, negative under a clear sky; assumed otherwise")
	fs.Float64Var(&q.bodyC, "body", math.NaN(), "body temperature of a pyrgeometer, degrees C; assumed otherwise")
	if err := fs.Parse(args); err != nil {
		return parseCode(err)
	}
	numbers := 0
	fs.Visit(func(f *flag.Flag) {
		switch f.Name {
		case "irradiance", "beam", "zenith", "net", "body":
			numbers++
		}
	})
	fromArchive := *archive != "" && *at != "" && numbers == 0
	fromFlags := *archive == "" && q.value == q.value
	if *site == "" || *instrument == "" || fs.NArg() > 0 || !fromArchive && !fromFlags {
		return complain(exitUsage, errors.New("budget: want --site FILE [--station S] --instrument I and either --archive DIR --time T "+
			"or --irradiance W [--beam W] [--zenith DEG] [--net W] [--body DEGC] [--time T]"))
	}
	q.archive, q.at = *archive, time.Now().UTC()
	if err := q.resolve(*site, *station, *instrument, *at); err != nil {
		return complain(exitUsage, fmt.Errorf("budget: %w", err))
	}
	out := bufio.NewWriter(os.Stdout)
	if err := errors.Join(q.print(out), out.Flush()); err != nil {
		return complain(exitProblem, fmt.Errorf("budget: %w", err))
	}
	return exitOK
}

// resolve finds what the flags name.
func (q *budgetRequest) resolve(site, station, instrument, at string) error {
	if at != "" {
		t, err := parseInstant(at)
		if err != nil {
			return err
		}
		q.at = t
	}
	q.at = q.at.Truncate(time.Minute)
	for _, v := range [...]float64{q.value, q.beamWm2, q.zenithDeg, q.netWm2, q.bodyC} {
		if math.IsInf(v, 0) {
			return fmt.Errorf("%v among the numbers: want finite ones", v)
		}
	}
	if q.zenithDeg < 0 || q.zenithDeg > 180 {
		return fmt.Errorf("--zenith %v: want 0 to 180 degrees", q.zenithDeg)
	}
	s, err := rules.Load(site)
	if err != nil {
		return err
	}
	if q.station, err = pickStation(s, station); err != nil {
		return err
	}
	var ids []string
	for i := range q.station.Instruments {
		in := &q.station.Instruments[i]
		if in.ID == instrument {
			q.instrument = in
		}
		ids = append(ids, in.ID)
	}
	if q.instrument == nil {
		return fmt.Errorf("station %s has no instrument %q; it has %s", q.station.ID, instrument, strings.Join(ids, ", "))
	}
	q.plan, err = engine.NewPlan(q.station)
	return err
}

// print writes the table.
func (q *budgetRequest) print(w io.Writer) error {
	at := q.at.Unix() / 60
	day := minute.FloorDiv(at, minute.PerDay)
	row := int(at - day*minute.PerDay)
	j := q.plan.NewJudged(day)
	stored := ""
	if q.archive != "" {
		var err error
		if stored, err = q.readDay(j, at); err != nil {
			return err
		}
		q.zenithDeg = j.ApparentZenithDeg[row]
	}
	budget, c := q.plan.Uncertainty(j, q.instrument.ID, row)
	if budget == nil {
		return fmt.Errorf("no calibration of %s holds at %s: ask for another time, or add the calibration to the site file", q.instrument.ID, minuteText(q.at))
	}
	if q.archive == "" {
		q.fromFlags(&c)
	} else if c.Value != c.Value {
		return fmt.Errorf("%s has no value in the minute from %s: ask for another minute", q.instrument.ID, minuteText(q.at))
	}
	q.printHead(w, budget, &c)
	if err := q.printRows(w, budget.Components(&c)); err != nil {
		return err
	}
	q.printSum(w, budget, &c, stored)
	return nil
}

func minuteText(t time.Time) string { return t.Format("2006-01-02T15:04Z") }

// fromFlags fills in the conditions of a minute that no archive tells.
func (q *budgetRequest) fromFlags(c *uncertainty.Conditions) {
	nan := math.NaN()
	*c = uncertainty.Conditions{Value: q.value, SD: nan, Years: c.Years, BeamWm2: q.beamWm2, NetWm2: q.netWm2, BodyC: q.bodyC, DomeC: nan}
	e := q.plan.Expect(q.at.Add(30 * time.Second).UnixMicro())
	if c.CosZenith = math.Max(0, math.Cos(q.zenithDeg*(math.Pi/180))); q.zenithDeg != q.zenithDeg {
		c.CosZenith, q.zenithDeg = e.Sun.BeamMu, e.ApparentZenithDeg
	}
	if c.BeamWm2 != c.BeamWm2 {
		switch m := q.instrument.Measures; {
		case m == rules.Global:
			c.BeamWm2 = uncertainty.BeamOfGlobal(q.value, c.CosZenith, e.ExtraterrestrialWm2)
		case m.Longwave():
			c.BeamWm2 = uncertainty.BeamAtMost(c.CosZenith, e.ExtraterrestrialWm2)
		case m == rules.Direct:
			c.BeamWm2 = q.value
		}
	}
}

// readDay prepares the minute's day from the archive's readings by the site file given, and gives what the archive holds of the minute.
func (q *budgetRequest) readDay(j *engine.Judged, at int64) (stored string, err error) {
	a, err := store.Open(vfs.OS{}, q.archive)
	if err != nil {
		return "", err
	}
	if _, err := stationsOf(a, q.station.ID); err != nil {
		return "", err
	}
	last := j.Day
	if q.station.Time.LabelEnd {
		last++ // the day's last minute carries a stamp of the next day
	}
	var all minute.Batch
	err = a.ReadRaw(q.station.ID, j.Day, last, func(b *minute.Batch) error {
		for i := range b.Rows() {
			r := b.Reading(i)
			all.Append(&r)
		}
		return nil
	})
	if err != nil {
		return "", err
	}
	g := minute.NewGatherer(q.plan.Layout())
	block := minute.NewBlock(j.Day, len(g.Layout().Channels))
	g.Fill(block, &all, 0, minute.PerDay)
	q.plan.Prepare(j, block, 0, minute.PerDay)
	if s := j.Primary(q.instrument.Measures); s == nil || s.Instrument != q.instrument.ID {
		return "", nil // its minutes are not stored
	}
	name := q.instrument.Measures.String()
	err = a.ReadMinutes(q.station.ID, at, at+1, []string{name, name + "_u95", name + "_verdict"}, func(r *store.Rows) error {
		value, u95, verdict := r.Find(name), r.Find(name+"_u95"), r.Find(name+"_verdict")
		if r.Rows == 0 || value == nil || u95 == nil || verdict == nil || value.Doubles == nil || u95.Doubles == nil || verdict.Codes == nil {
			return nil
		}
		if code := verdict.Codes[0]; code >= 0 {
			stored = fmt.Sprintf("in the archive: %s with U95 %s, %s", number(value.Doubles[0], 2), number(u95.Doubles[0], 2), verdict.Dict[code])
		}
		return nil
	})
	return stored, err
}

func (q *budgetRequest) printHead(w io.Writer, b *uncertainty.Budget, c *uncertainty.Conditions) {
	m := q.instrument.Measures
	fmt.Fprintf(w, "%s %s, %s, %s: %s\n", q.station.ID, q.instrument.ID, m, minuteText(q.at), b.Class)
	fmt.Fprintf(w, "value %.2f %s, sun at %.2f degrees from the zenith", c.Value, m.Unit(), q.zenithDeg)
	if c.BeamWm2 == c.BeamWm2 {
		fmt.Fprintf(w, ", beam %.1f W/m2", c.BeamWm2)
	}
	if c.NetWm2 == c.NetWm2 {
		fmt.Fprintf(w, ", net longwave %.1f W/m2", c.NetWm2)
	}
	if m.Longwave() && c.BodyC == c.BodyC {
		fmt.Fprintf(w, ", body %.2f degC", c.BodyC)
	}
	if c.Years == c.Years {
		fmt.Fprintf(w, ", calibrated %.2f years before\n\n", c.Years)
	} else {
		fmt.Fprintf(w, ", calibration not dated, taken as %d years old\n\n", uncertainty.YearsAssumed)
	}
}

func (q *budgetRequest) printRows(w io.Writer, rows []uncertainty.Component) error {
	sum := 0.0
	for i := range rows {
		sum += rows[i].Standard * rows[i].Standard
	}
	t := tabwriter.NewWriter(w, 0, 4, 2, ' ', 0)
	fmt.Fprintf(t, "component\tstandard, %s\tshare\tdistribution\tsource\n", q.instrument.Measures.Unit())
	for i := range rows {
		x := &rows[i]
		fmt.Fprintf(t, "%s\t%12.3f\t%3.0f %%\t%s\t%s\n", x.Name, x.Standard, share(x.Standard, sum), x.Distribution, x.Source)
	}
	return t.Flush()
}

// share is the part of the variance that a component makes, percent.
func share(standard, variance float64) float64 {
	if !(variance > 0) {
		return 0
	}
	return 100 * standard * standard / variance
}

func (q *budgetRequest) printSum(w io.Writer, b *uncertainty.Budget, c *uncertainty.Conditions, stored string) {
	m := q.instrument.Measures
	u := b.Standard(c)
	fmt.Fprintf(w, "\ncombined standard uncertainty  %.2f %s\n", u, m.Unit())
	fmt.Fprintf(w, "expanded, k=2 (U95)            %.2f %s", uncertainty.Coverage*u, m.Unit())
	if math.Abs(c.Value) > limit.NearNothingWm2 {
		fmt.Fprintf(w, ", %.1f %% of the value", 100*uncertainty.Coverage*u/math.Abs(c.Value))
	}
	fmt.Fprintln(w)
	if stored != "" {
		fmt.Fprintln(w, stored)
	}
	rows := b.Components(c)
	most := 0
	for i := range rows {
		if rows[i].Standard > rows[most].Standard {
			most = i
		}
	}
	fmt.Fprintf(w, "largest part: %s, %.0f %% of the variance\n", rows[most].Name, share(rows[most].Standard, u*u))
	if target, ok := uncertainty.Target(m, c.Value); ok {
		met := "met"
		if uncertainty.Coverage*u > target {
			met = "not met"
		}
		fmt.Fprintf(w, "baseline-network target of 2004: %.1f W/m2, %s\n", target, met)
	}
}
