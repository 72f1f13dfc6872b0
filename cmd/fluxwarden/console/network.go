package console

import (
	"cmp"
	"context"
	"fmt"
	"html/template"
	"net/http"
	"slices"
	"strings"
	"time"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/qc/sun"
	"fluxwarden/rules"
)

// A stationState is what the network page shows of a station: the verdicts of the last day's minutes, and what is open.
type stationState struct {
	end     int64 // minute after the newest judged one
	version int64 // goes up with every change
	series  []seriesState
	open    []fault.Episode
	row     networkRow // as last made
	rowOf   rowKey
}

// A seriesState is a ring of one instrument's verdicts: minute m stands at m modulo a day. A minute later than a day is overwritten before it is shown.
type seriesState struct {
	instrument string
	quantity   rules.Quantity
	verdicts   [minute.PerDay]rules.Verdict
}

// Minutes takes note of judged minutes. It is quick and keeps nothing of the Judged.
func (c *Console) Minutes(j *engine.Judged, from, to int) {
	c.mu.Lock()
	defer c.mu.Unlock()
	st := c.state(j.Station)
	begin := j.Day * minute.PerDay
	for k := range j.Series {
		s := &j.Series[k]
		if int(s.Quantity) >= rules.RadiationCount {
			continue
		}
		ring := st.of(s.Instrument, s.Quantity)
		st.clear(ring, begin+int64(from))
		for i := from; i < to; i++ {
			if m := begin + int64(i); m >= st.end-minute.PerDay {
				ring.verdicts[m%minute.PerDay] = s.Verdict[i]
			}
		}
	}
	st.end = max(st.end, begin+int64(to))
	st.version++
}

// clear makes absent what lies between the newest minute known and the first one told now.
func (s *stationState) clear(ring *seriesState, next int64) {
	for m := max(s.end, next-minute.PerDay); m < next; m++ {
		ring.verdicts[m%minute.PerDay] = rules.Absent
	}
}

// Episodes takes note of a station's episodes as they now are.
func (c *Console) Episodes(station string, episodes []fault.Episode) {
	var open []fault.Episode
	for i := range episodes {
		if openEnded(&episodes[i]) {
			open = append(open, episodes[i])
		}
	}
	slices.SortStableFunc(open, func(x, y fault.Episode) int {
		return cmp.Or(-cmp.Compare(x.Severity, y.Severity), cmp.Compare(x.From, y.From))
	})
	c.mu.Lock()
	defer c.mu.Unlock()
	st := c.state(station)
	st.open = open
	st.version++
}

func (c *Console) state(id string) *stationState {
	st := c.states[id]
	if st == nil {
		st = &stationState{}
		c.states[id] = st
	}
	return st
}

func (s *stationState) of(instrument string, q rules.Quantity) *seriesState {
	for i := range s.series {
		if s.series[i].instrument == instrument && s.series[i].quantity == q {
			return &s.series[i]
		}
	}
	ring := seriesState{instrument: instrument, quantity: q}
	for i := range ring.verdicts {
		ring.verdicts[i] = rules.Absent
	}
	s.series = append(s.series, ring)
	return &s.series[len(s.series)-1]
}

// Warm fills the rings from the archive, so that a new start does not show an empty day. What has been judged meanwhile stays.
func (c *Console) Warm(ctx context.Context) error {
	for _, id := range c.archive.stations() {
		if ctx.Err() != nil {
			return nil
		}
		if err := c.warmStation(id); err != nil {
			return fmt.Errorf("console: station %s: %w", id, err)
		}
	}
	return nil
}

func (c *Console) warmStation(id string) error {
	end := (c.today() + 1) * minute.PerDay
	columns := []string{"time"}
	for _, q := range radiation() {
		columns = append(columns, q.String()+"_verdict")
	}
	s, err := readSpan(c.archive, id, end-2*minute.PerDay, end, columns)
	if err != nil || s.rows == 0 {
		return err
	}
	episodes, err := c.archive.faults(id)
	if err != nil {
		return err
	}
	last := s.from + int64(len(s.have)-1-slices.Index(reversed(s.have), true)) + 1
	c.mu.Lock()
	known := c.state(id).end
	for _, q := range s.quantities(radiation()) {
		st := c.state(id)
		ring := st.of(c.instrumentOf(id, q), q)
		for i, v := range s.verdicts(q) {
			if m := s.from + int64(i); m >= last-minute.PerDay && m < last && (known == 0 || m < known-minute.PerDay) {
				ring.verdicts[m%minute.PerDay] = v
			}
		}
	}
	st := c.state(id)
	st.end = max(st.end, last)
	st.version++
	quiet := known == 0
	c.mu.Unlock()
	if quiet {
		c.Episodes(id, episodes)
	}
	return nil
}

func reversed(x []bool) []bool {
	x = slices.Clone(x)
	slices.Reverse(x)
	return x
}

// instrumentOf names the instrument whose values stand in the quantity's columns.
func (c *Console) instrumentOf(station string, q rules.Quantity) string {
	if st := c.config.Site().Station(station); st != nil {
		for i := range st.Instruments {
			if x := &st.Instruments[i]; x.Measures == q && x.Primary {
				return x.ID
			}
		}
	}
	return q.String()
}

// halfHours is how many cells a ribbon of a day has.
const halfHours = 48

// cells sums a ring's last day up to the end given.
func (r *seriesState) cells(end int64) (cells [halfHours]cell, accepted, known int) {
	const wide = minute.PerDay / halfHours
	place := int(((end % minute.PerDay) + minute.PerDay) % minute.PerDay) // of the oldest minute
	for k := range cells {
		for range wide {
			cells[k][r.verdicts[place]]++
			if place++; place == minute.PerDay {
				place = 0
			}
		}
		accepted += int(cells[k][rules.Accepted])
	}
	return cells, accepted, minute.PerDay
}

// A networkRow is one station on the network page.
type networkRow struct {
	ID, Name, Sun, Last string
	Silent              bool
	Ribbons             template.HTML
	Faults              []episodeLine
	Words               string // accepted shares, for the screen reader and for who does not see the ribbon
	grave               float64
}

// silentAfter is how long a station may send nothing before the page says so.
const silentAfter = 15 * time.Minute

// A rowKey says what a row was made of: when the state, the minute or the rules have changed, it is made anew.
type rowKey struct {
	version, minute int64
	station         *rules.Station
}

// rowState gives a station's row; the caller holds the lock.
func (c *Console) rowState(st *rules.Station, s *stationState, now time.Time) networkRow {
	if s == nil {
		return c.makeRow(st, s, now)
	}
	if key := (rowKey{s.version, now.Unix() / 60, st}); s.rowOf != key {
		s.row, s.rowOf = c.makeRow(st, s, now), key
	}
	return s.row
}

func (c *Console) makeRow(st *rules.Station, s *stationState, now time.Time) networkRow {
	row := networkRow{ID: st.ID, Name: st.Name, Last: "nothing yet"}
	if row.Name == "" {
		row.Name = st.ID
	}
	p := sun.At(now.UnixMicro(), sun.Site{LatitudeDeg: st.LatitudeDeg, LongitudeDeg: st.LongitudeDeg, ElevationM: st.ElevationM}, 1013, 10, sun.DeltaTSeconds(float64(now.Year())))
	row.Sun = fmt.Sprintf("down %.0f°", p.ApparentZenithDeg-90)
	if p.ApparentZenithDeg < 90.27 {
		row.Sun = fmt.Sprintf("up %.0f°", max(0, 90-p.ApparentZenithDeg))
	}
	if s == nil || s.end == 0 {
		row.grave = 0.5
		return row
	}
	row.Last = minuteName(s.end - 1)
	if now.Sub(time.Unix(s.end*60, 0)) > silentAfter {
		row.Silent, row.grave = true, row.grave+5
	}
	var b strings.Builder
	height := 9 * len(s.series)
	fmt.Fprintf(&b, `<svg viewBox="0 0 300 %d" class="thin" role="img" aria-label="verdicts of the last 24 hours">`, max(height, 9))
	var shares []string
	for i := range s.series {
		ring := &s.series[i]
		cells, accepted, known := ring.cells(s.end)
		worst := make([]rules.Verdict, halfHours)
		for k := range cells {
			worst[k] = cells[k].worst()
		}
		b.WriteString(ribbon(ring.instrument, worst, 60, 240, float64(9*i+1), 7))
		share := float64(accepted) / float64(known)
		shares = append(shares, fmt.Sprintf("%s %.0f %%", ring.instrument, 100*share))
		row.grave += 1 - share
	}
	b.WriteString("</svg>")
	row.Ribbons = template.HTML(b.String())
	row.Words = strings.Join(shares, ", ")
	for i := range s.open {
		row.Faults = append(row.Faults, lineOf(&s.open[i]))
		row.grave += 10
		if s.open[i].Severity == rules.Act {
			row.grave += 100
		}
	}
	return row
}

func (c *Console) rows() []networkRow {
	now, site := c.now(), c.config.Site()
	c.mu.Lock()
	defer c.mu.Unlock()
	var rows []networkRow
	seen := map[string]bool{}
	for i := range site.Stations {
		rows = append(rows, c.rowState(&site.Stations[i], c.states[site.Stations[i].ID], now))
		seen[site.Stations[i].ID] = true
	}
	for _, id := range c.archive.stations() {
		if !seen[id] {
			rows = append(rows, c.rowState(&rules.Station{ID: id, Name: id}, c.states[id], now))
		}
	}
	slices.SortStableFunc(rows, func(x, y networkRow) int {
		return cmp.Or(-cmp.Compare(x.grave, y.grave), cmp.Compare(x.ID, y.ID))
	})
	return rows
}

func (c *Console) networkPage(w http.ResponseWriter, r *http.Request) error {
	rows := c.rows()
	sick := 0
	for _, row := range rows {
		if len(row.Faults) > 0 || row.Silent {
			sick++
		}
	}
	words := fmt.Sprintf("%d stations, nothing known to be wrong at any.", len(rows))
	if sick > 0 {
		words = fmt.Sprintf("%d of %d stations need a look.", sick, len(rows))
	}
	return c.render(w, "network.html", struct {
		frame
		Rows  []networkRow
		Words string
	}{c.frame(r, "Network"), rows, words})
}

func (c *Console) networkJSON(w http.ResponseWriter, _ *http.Request) error {
	type line struct {
		Station  string   `json:"station"`
		Name     string   `json:"name"`
		Sun      string   `json:"sun"`
		Last     string   `json:"last"`
		Silent   bool     `json:"silent"`
		Accepted string   `json:"accepted"`
		Faults   []string `json:"faults"`
	}
	list := []line{}
	for _, r := range c.rows() {
		l := line{r.ID, r.Name, r.Sun, r.Last, r.Silent, r.Words, []string{}}
		for _, f := range r.Faults {
			l.Faults = append(l.Faults, f.Words)
		}
		list = append(list, l)
	}
	writeJSON(w, map[string]any{"stations": list})
	return nil
}
