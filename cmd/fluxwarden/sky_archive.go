package main

import (
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"strconv"
	"strings"
	"time"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/sky"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// A skyQuery asks for the learnt sky of past minutes.
type skyQuery struct {
	archive, site, station string
	begin, end             time.Time
	step                   time.Duration
}

// learntColumns are what the days before a day have taught, beside each minute.
var learntColumns = []string{"sky_model", "aerosol", "aerosol_low", "aerosol_high", "diffuse_gain", "global_gain", "days_learnt", "last_learnt", "same_day_aerosol"}

// skyBand is how many standard deviations aerosol_low and aerosol_high lie off.
const skyBand = 2

// A learntDay is one day's learnt sky.
type learntDay struct {
	learnt sky.Learnt
	fit    sky.Learnt // of the day itself
	fitted bool
}

// archiveSky writes the sky that past minutes were judged by.
func archiveSky(w io.Writer, q *skyQuery, sep string) error {
	if q.step%time.Minute != 0 {
		return fmt.Errorf("step %s: the archive has whole minutes; give --step in them", q.step)
	}
	a, err := store.Open(vfs.OS{}, q.archive)
	if err != nil {
		return err
	}
	list, err := stationsOf(a, q.station)
	if err != nil {
		return err
	}
	if len(list) != 1 {
		return fmt.Errorf("the archive has %d stations: say which with --station", len(list))
	}
	p := &skyPrinter{w: w, sep: sep, archive: a, station: list[0], site: q.site, day: math.MinInt64}
	return p.print(q)
}

// A skyPrinter writes rows; it learns a day's sky when the first row of the day comes.
type skyPrinter struct {
	w             io.Writer
	sep           string
	archive       *store.Archive
	station, site string
	digest        string // of the rules that the plan is of
	plan          *engine.Plan
	model         string
	day           int64
	now           learntDay
	rows          int
}

var skyRowColumns = []string{"zenith_deg", "apparent_zenith_deg", "azimuth_deg", "extraterrestrial", "clear_global", "clear_direct", "clear_diffuse",
	"clear_lw_down", "global_measured", "direct_measured", "diffuse_measured", "lw_down_measured"}

func (p *skyPrinter) print(q *skyQuery) error {
	header := append(append([]string{"time"}, skyRowColumns...), learntColumns...)
	if err := p.line(header); err != nil {
		return err
	}
	from, to, step := q.begin.Unix()/60, (q.end.Unix()+59)/60, int64(q.step/time.Minute)
	err := p.archive.ReadMinutes(p.station, from, to, skyRowColumns, func(r *store.Rows) error {
		for i := range r.Rows {
			m := r.Minute(i)
			if (m-from)%step != 0 {
				continue
			}
			if err := p.learn(m / 1440); err != nil {
				return err
			}
			cells := []string{minuteTime(m).Format(time.RFC3339)}
			for _, c := range skyRowColumns {
				v := r.Find(c)
				if v == nil || v.Doubles == nil {
					cells = append(cells, "")
					continue
				}
				cells = append(cells, number(v.Doubles[i], 3))
			}
			if err := p.line(append(cells, p.cells()...)); err != nil {
				return err
			}
			p.rows++
		}
		return nil
	})
	if err == nil && p.rows == 0 {
		err = fmt.Errorf("station %s: the archive has no minutes from %s to %s", p.station, q.begin.Format(time.RFC3339), q.end.Format(time.RFC3339))
	}
	return err
}

func (p *skyPrinter) line(cells []string) error {
	tail := ""
	if p.sep == "\t" {
		tail = "\t"
	}
	_, err := fmt.Fprintln(p.w, strings.Join(cells, p.sep)+tail)
	return err
}

// rules makes the plan by the rules that a day was judged by, or by the site file if one is given.
func (p *skyPrinter) rules(day int64) error {
	digest, from := "", p.site
	if from == "" {
		revisions, err := p.archive.Revisions(p.station, day)
		if err != nil {
			return err
		}
		if n := len(revisions); n > 0 {
			digest = revisions[n-1].RulesDigest
		}
		from = "rules/" + digest + ".yaml of the archive"
	}
	if p.plan != nil && digest == p.digest {
		return nil
	}
	var site *rules.Site
	var err error
	if p.site != "" {
		site, err = rules.Load(p.site)
	} else {
		var text []byte
		if text, err = p.archive.Rules(digest); err == nil {
			site, err = rules.Parse(from, text)
		}
	}
	if err != nil {
		return fmt.Errorf("rules of day %s: %w; give the site file with --site", dayText(day), err)
	}
	st := site.Station(p.station)
	if st == nil {
		return fmt.Errorf("station %s: %s does not have it; give its site file with --site", p.station, from)
	}
	p.digest, p.model = digest, st.Sky.Model
	p.plan, err = engine.NewPlan(st)
	return err
}

// learn makes a day's sky from the summaries of the thirty days before, as the judge did.
func (p *skyPrinter) learn(day int64) error {
	if day == p.day {
		return nil
	}
	p.day, p.now = day, learntDay{}
	if err := p.rules(day); err != nil {
		return err
	}
	var history []engine.DaySummary
	err := p.archive.EachSummary(p.station, day-engine.HistoryDays, day, func(x store.Summary) error {
		s, err := engine.DecodeSummary(x.JSON)
		if err != nil {
			return fmt.Errorf("station %s: summary of day %s: %w", p.station, dayText(x.Day), err)
		}
		history = append(history, s)
		return nil
	})
	if err != nil {
		return err
	}
	p.now.learnt = p.plan.LearntSky(day, history)
	if n := len(history); n > 0 && history[n-1].Day == day {
		p.now.fit, p.now.fitted = p.plan.FittedSky(&history[n-1])
	}
	return nil
}

func (p *skyPrinter) cells() []string {
	l := &p.now.learnt
	low, high := l.AerosolBand(skyBand)
	last, fit := "", ""
	if l.Days > 0 {
		last = dayText(l.LastDay)
	}
	if p.now.fitted {
		fit = number(p.now.fit.Aerosol, 4)
	}
	return []string{p.model, number(l.Aerosol, 4), number(low, 4), number(high, 4), number(l.DiffuseGain, 3), number(l.GlobalGain, 3),
		strconv.Itoa(l.Days), last, fit}
}

// printArchiveSky is `sky --archive`.
func printArchiveSky(q *skyQuery, format string) error {
	return printed(os.Stdout, format, func(w io.Writer, sep string) error { return archiveSky(w, q, sep) })
}

var errSkyUsage = errors.New("sky: want --site FILE [--station S] --from T --to T [--step 1m] [--format csv|table], or --archive DIR for the sky that past minutes were judged by")
