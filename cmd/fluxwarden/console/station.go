package console

import (
	"fmt"
	"net/http"
	"net/url"
	"strings"
	"time"

	"fluxwarden/qc/minute"
	"fluxwarden/qc/sun"
	"fluxwarden/rules"
)

// station finds the station that a request names: of the rules in force or of the archive. Of one that only the archive knows, what a site file
// says is missing.
func (c *Console) station(r *http.Request) (*rules.Station, error) {
	id := r.PathValue("station")
	if st := c.config.Site().Station(id); st != nil {
		return named(st), nil
	}
	if c.archive.has(id) {
		return &rules.Station{ID: id, Name: id}, nil
	}
	return nil, notFound(fmt.Sprintf("there is no station %q", id), "The network page lists those that there are.")
}

// named gives a station whose name is never empty.
func named(st *rules.Station) *rules.Station {
	if st.Name == "" {
		copied := *st
		copied.Name = st.ID
		return &copied
	}
	return st
}

// firstDay and lastDay bound what a page may ask for: the first satellites that watched the sun, and the end of four-digit years.
var (
	firstDay = time.Date(1900, 1, 1, 0, 0, 0, 0, time.UTC)
	lastDay  = time.Date(2100, 1, 1, 0, 0, 0, 0, time.UTC)
)

func parseDay(text string) (int64, error) {
	t, err := time.Parse(time.DateOnly, text)
	if err != nil {
		return 0, badInput(fmt.Sprintf("%q is not a date", text), "Write it as 2026-06-21.")
	}
	if t.Before(firstDay) || !t.Before(lastDay) {
		return 0, notFound(fmt.Sprintf("no station has measured on %s", text), "Give a day between 1900 and 2099.")
	}
	return t.Unix() / 86400, nil
}

// stationDay reads the station and the day that a request names.
func (c *Console) stationDay(r *http.Request) (*rules.Station, int64, error) {
	st, err := c.station(r)
	if err != nil {
		return nil, 0, err
	}
	day, err := parseDay(r.PathValue("day"))
	return st, day, err
}

func dayName(day int64) string { return time.Unix(day*86400, 0).UTC().Format(time.DateOnly) }

func dayLink(station string, day int64) string {
	return "/station/" + url.PathEscape(station) + "/day/" + dayName(day)
}

func minuteName(m int64) string { return time.Unix(m*60, 0).UTC().Format("2006-01-02 15:04Z") }

func stationLink(id string) link { return link{Text: id, To: "/station/" + url.PathEscape(id)} }

// today is the UTC day that it is.
func (c *Console) today() int64 { return minute.Stamp(c.now().UnixMicro()).Day() }

// stationPage leads to the newest day that there is.
func (c *Console) stationPage(w http.ResponseWriter, r *http.Request) error {
	st, err := c.station(r)
	if err != nil {
		return err
	}
	day := c.today()
	if c.archive.has(st.ID) {
		days, err := c.archive.days(st.ID)
		if err != nil {
			return err
		}
		if len(days) > 0 {
			day = days[len(days)-1]
		}
	}
	w.Header().Set("Location", dayLink(st.ID, day))
	w.WriteHeader(http.StatusSeeOther)
	return nil
}

// A solarDay is what the sun does on a day at a station, in minutes since 1970.
type solarDay struct {
	rise, transit, set float64
	risesAndSets       bool
	words              string
}

func solarDayOf(st *rules.Station, day int64) solarDay {
	site := sun.Site{LatitudeDeg: st.LatitudeDeg, LongitudeDeg: st.LongitudeDeg, ElevationM: st.ElevationM}
	e := sun.RiseSet(day, site, sun.DeltaTSeconds(sun.DecimalYear(day)))
	at := func(seconds float64) float64 { return float64(day*minute.PerDay) + seconds/60 }
	s := solarDay{rise: at(e.RiseSeconds), transit: at(e.TransitSeconds), set: at(e.SetSeconds), risesAndSets: e.State == sun.SunRisesAndSets}
	clock := func(m float64) string { return minuteName(int64(m))[11:] }
	if s.risesAndSets {
		s.words = fmt.Sprintf("Sunrise %s, transit %s, sunset %s.", clock(s.rise), clock(s.transit), clock(s.set))
	} else {
		s.words = fmt.Sprintf("The sun does not cross the horizon; transit %s.", clock(s.transit))
	}
	return s
}

// solarTicks are the hours of local solar time in UTC minutes: at transit it is twelve.
func solarTicks(transit, from, to float64) []tick {
	var list []tick
	for h := -12; h <= 12; h++ {
		if at := transit + float64(60*h); at >= from && at <= to && (h%3 == 0 || to-from <= 6*60) {
			list = append(list, tick{at, fmt.Sprintf("%02d", (12+h+24)%24)})
		}
	}
	return list
}

// utcTicks are round UTC times between two minutes.
func utcTicks(from, to float64) []tick {
	step := 1.0
	for _, s := range []float64{5, 15, 30, 60, 180} {
		step = s
		if (to-from)/s <= 13 {
			break
		}
	}
	var list []tick
	for at := float64(int64(from/step)) * step; at <= to; at += step {
		if at >= from {
			list = append(list, tick{at, strings.TrimSuffix(minuteName(int64(at))[11:], "Z")})
		}
	}
	return list
}
