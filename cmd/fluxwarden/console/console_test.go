package console

import (
	"bufio"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// kept is an archive of a few days of one station that stays in testdata.
const kept = "../../../testdata/format/v1-judged/archive"

var laterThatDay = time.Date(2026, 7, 2, 18, 0, 0, 0, time.UTC)

func keptConsole(t testing.TB) *Console {
	t.Helper()
	a, err := store.Open(vfs.OS{}, kept)
	if err != nil {
		t.Fatal(err)
	}
	texts, err := filepath.Glob(kept + "/rules/*.yaml")
	if err != nil || len(texts) == 0 {
		t.Fatal("no rules in the kept archive", err)
	}
	text, err := os.ReadFile(texts[0])
	if err != nil {
		t.Fatal(err)
	}
	site, err := rules.Parse("site.yaml", text)
	if err != nil {
		t.Fatal(err)
	}
	return New(Config{Archive: Of(a), Site: func() *rules.Site { return site }, Now: func() time.Time { return laterThatDay }, Program: "fluxwarden test"})
}

func ask(t testing.TB, h http.Handler, path string) *httptest.ResponseRecorder {
	t.Helper()
	r := httptest.NewRequest("GET", path, nil)
	w := httptest.NewRecorder()
	h.ServeHTTP(w, r)
	return w
}

// The pages that a person goes through are there, say what they should, and name nothing from elsewhere.
func TestPages(t *testing.T) {
	c := keptConsole(t)
	if err := c.Warm(context.Background()); err != nil {
		t.Fatal(err)
	}
	h := c.Handler()
	episodes, err := c.archive.faults("northmoor")
	if err != nil || len(episodes) == 0 {
		t.Fatal("the kept archive has no episode", err)
	}
	for _, x := range []struct {
		path  string
		words []string
	}{
		{"/", []string{"northmoor", "2026-07-02", "accepted:"}},
		{"/station/northmoor/day/2026-06-30", []string{"Shortwave", "Sunrise", "Verdicts", "solar", "/station/northmoor/day/2026-06-29", "minutes.csv"}},
		{"/station/northmoor/day/2026-06-30?from=09:00&to=12:00", []string{"whole day", "earlier", "later"}},
		{"/station/northmoor/year/2026", []string{"days of the year", "29 June", "/station/northmoor/report/2026-06"}},
		{faultLink(&episodes[0]), []string{"What to do", "How it is told", episodes[0].Kind.Entry().Title}},
		{"/station/northmoor/residual?show=closure&from=2026-06-29&to=2026-07-02", []string{"Closure", "bearing of the sun"}},
		{"/station/northmoor/residual?show=night_zero&against=zenith&from=2026-06-29&to=2026-07-02", []string{"degrees"}},
		{"/station/northmoor/residual?show=closure&from=2026-06-01&to=2026-07-03", []string{"a month"}},
		{"/station/northmoor/report/2026-06", []string{"June 2026", "How complete, how good", "Daily means of accepted minutes"}},
	} {
		w := ask(t, h, x.path)
		if w.Code != http.StatusOK {
			t.Errorf("%s: %d %s", x.path, w.Code, w.Body)
			continue
		}
		page := w.Body.String()
		for _, word := range x.words {
			if !strings.Contains(page, word) {
				t.Errorf("%s: the page does not say %q", x.path, word)
			}
		}
		for _, word := range []string{"http://", "https://", "ZgotmplZ", "NaN", "%!", "<no value>"} {
			if strings.Contains(page, word) {
				t.Errorf("%s: the page has %q in it", x.path, word)
			}
		}
		if csp := w.Header().Get("Content-Security-Policy"); !strings.Contains(csp, "default-src 'none'") {
			t.Errorf("%s: content security policy %q", x.path, csp)
		}
	}
	if w := ask(t, h, "/station/northmoor"); w.Code != http.StatusSeeOther || w.Header().Get("Location") != "/station/northmoor/day/2026-07-02" {
		t.Errorf("a station's page leads to %d %q, want its newest day", w.Code, w.Header().Get("Location"))
	}
}

// What cannot be shown is said, with what to do and the right status.
func TestBadInput(t *testing.T) {
	h := keptConsole(t).Handler()
	for _, x := range []struct {
		path string
		code int
		word string
	}{
		{"/station/northmoor/day/2026-07-19", 404, "Its days go from 2026-06-29"},
		{"/station/northmoor/day/1800-01-01", 404, "1900"},
		{"/station/northmoor/day/9999-12-31", 404, "2099"},
		{"/station/northmoor/day/yesterday", 400, "2026-06-21"},
		{"/station/northmoor/day/2026-06-30?from=25:00", 400, "hours and minutes"},
		{"/station/northmoor/day/2026-06-30?from=12:00&to=11:00", 400, "later one"},
		{"/station/elsewhere/day/2026-06-30", 404, "no station"},
		{"/station/%3Cscript%3E/day/2026-06-30", 404, "&lt;script&gt;"},
		{"/station/northmoor/residual?from=2016-01-01&to=2026-01-01", 400, "export has the rest"},
		{"/station/northmoor/residual?from=2026-07-01&to=2026-06-01", 400, "later day"},
		{"/station/northmoor/residual?show=sorrow", 400, "no residual"},
		{"/station/northmoor/residual?against=god", 400, "bearing"},
		{"/station/northmoor/fault/gone", 404, "renamed"},
		{"/station/northmoor/year/20260", 400, "not a year"},
		{"/station/northmoor/year/1800", 404, "1900"},
		{"/station/northmoor/year/2019", 404, "no minutes"},
		{"/station/northmoor/report/2019-01", 404, "no minutes"},
		{"/station/northmoor/report/June", 400, "not a month"},
		{"/nowhere", 404, "network page"},
		{"/api/v1/station/northmoor/day/2031-01-01", 404, `"mend"`},
		{"/station/northmoor/day/2031-01-01/minutes.csv", 404, "Its days go"},
		{"/station/northmoor/day/2026-06-30/minutes.xls", 404, "minutes.nc"},
	} {
		w := ask(t, h, x.path)
		if w.Code != x.code || !strings.Contains(w.Body.String(), x.word) {
			t.Errorf("%s: %d, want %d and %q in\n%s", x.path, w.Code, x.code, x.word, w.Body)
		}
		if strings.Contains(w.Body.String(), "<script>") {
			t.Errorf("%s: what was asked for stands in the page as it is", x.path)
		}
	}
}

// The JSON of a day holds the archive's own numbers.
func TestDayJSON(t *testing.T) {
	c := keptConsole(t)
	w := ask(t, c.Handler(), "/api/v1/station/northmoor/day/2026-06-30")
	var got struct {
		From    int64
		Columns []struct {
			Name     string
			Values   []*float64
			Verdicts []string
		}
	}
	if err := json.Unmarshal(w.Body.Bytes(), &got); err != nil {
		t.Fatal(err)
	}
	s, err := readSpan(c.archive, "northmoor", got.From, got.From+minute.PerDay, []string{"time", "global", "global_verdict"})
	if err != nil {
		t.Fatal(err)
	}
	compared := 0
	for _, col := range got.Columns {
		if col.Name != "global" {
			continue
		}
		for i, v := range s.number("global") {
			if (v == v) != (col.Values[i] != nil) || v == v && math.Abs(*col.Values[i]-v) > 0.00501 || col.Verdicts[i] != s.words["global_verdict"][i] {
				t.Fatalf("minute %d: %v", i, v)
			}
			compared++
		}
	}
	if compared != minute.PerDay {
		t.Errorf("%d minutes compared", compared)
	}
}

// A day is given as export gives it, in each form.
func TestDayFiles(t *testing.T) {
	h := keptConsole(t).Handler()
	for name, begins := range map[string]string{"minutes.csv": "time,global", "minutes.nc": "CDF", "minutes.parquet": "PAR1"} {
		w := ask(t, h, "/station/northmoor/day/2026-06-30/"+name)
		if w.Code != 200 || !strings.HasPrefix(w.Body.String(), begins) || !strings.Contains(w.Header().Get("Content-Disposition"), "northmoor_2026-06-30_"+name) {
			t.Errorf("%s: %d, %d bytes, %v", name, w.Code, w.Body.Len(), w.Header())
		}
	}
}

// A station's name is text, whatever is in it.
func TestAStationCalledScriptStaysText(t *testing.T) {
	c := keptConsole(t)
	site := *c.config.Site()
	st := site.Stations[0]
	st.Name = `<script>alert(1)</script>`
	site.Stations = []rules.Station{st}
	c.config.Site = func() *rules.Site { return &site }
	for _, path := range []string{"/", "/station/northmoor/day/2026-06-30", "/station/northmoor/report/2026-06", "/station/northmoor/year/2026"} {
		if page := ask(t, c.Handler(), path).Body.String(); strings.Contains(page, st.Name) || !strings.Contains(page, "&lt;script&gt;") {
			t.Errorf("%s does not keep a station's name as text", path)
		}
	}
}

func judgedMinutes(station string, day int64, verdicts ...rules.Verdict) *engine.Judged {
	return &engine.Judged{Station: station, Day: day, Rows: len(verdicts), Series: []engine.Series{{Instrument: "G1", Quantity: rules.Global, Primary: true, Verdict: verdicts}}}
}

// A row that changes reaches who looks, within a second or two of its minute.
func TestLiveRows(t *testing.T) {
	c := keptConsole(t)
	server := httptest.NewServer(c.Handler())
	defer server.Close()
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	defer cancel()
	r, _ := http.NewRequestWithContext(ctx, "GET", server.URL+"/live", nil)
	resp, err := http.DefaultClient.Do(r)
	if err != nil {
		t.Fatal(err)
	}
	defer resp.Body.Close()
	lines := bufio.NewScanner(resp.Body)
	lines.Buffer(nil, 1<<20)
	if !lines.Scan() || lines.Text() != "retry: 3000" {
		t.Fatalf("first line %q", lines.Text())
	}
	c.Minutes(judgedMinutes("northmoor", laterThatDay.Unix()/86400, rules.Accepted, rules.Rejected), 0, 2)
	for lines.Scan() {
		if data, ok := strings.CutPrefix(lines.Text(), "data: "); ok {
			var row map[string]string
			if err := json.Unmarshal([]byte(data), &row); err != nil {
				t.Fatal(err)
			}
			if row["id"] != "northmoor" || !strings.Contains(row["html"], "s-northmoor") || !strings.HasPrefix(row["last"], "2026-07-02 00:01") {
				t.Errorf("row %v", row)
			}
			return
		}
	}
	t.Fatal("no row came", lines.Err())
}

// The ring shows the last day and nothing older, in whatever pieces the minutes come.
func TestRing(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c := New(Config{Archive: func(func(*store.Archive) error) error { return nil }})
		want := map[int64]rules.Verdict{}
		at := int64(20000 * minute.PerDay)
		for range rapid.IntRange(1, 8).Draw(t, "pieces") {
			at += rapid.Int64Range(0, 2*minute.PerDay).Draw(t, "silence")
			day, from := at/minute.PerDay, int(at%minute.PerDay)
			n := rapid.IntRange(1, minute.PerDay-from).Draw(t, "minutes")
			verdicts := make([]rules.Verdict, from+n)
			for i := from; i < from+n; i++ {
				verdicts[i] = rules.Verdict(rapid.IntRange(0, rules.VerdictCount-1).Draw(t, "verdict"))
				want[day*minute.PerDay+int64(i)] = verdicts[i]
			}
			c.Minutes(judgedMinutes("s", day, verdicts...), from, from+n)
			at += int64(n)
		}
		st := c.states["s"]
		if st.end != at {
			t.Fatalf("end %d, want %d", st.end, at)
		}
		for m := at - minute.PerDay; m < at; m++ {
			v, ok := want[m]
			if !ok {
				v = rules.Absent
			}
			if got := st.series[0].verdicts[m%minute.PerDay]; got != v {
				t.Fatalf("minute %d before the end: %s, want %s", at-m, got, v)
			}
		}
	})
}

func TestTicksAreRoundAndInside(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		low := rapid.Float64Range(-1e5, 1e5).Draw(t, "low")
		high := low + rapid.Float64Range(1e-3, 1e6).Draw(t, "range")
		list := ticks(low, high, 6)
		if len(list) > 7 || len(list) < 1 {
			t.Fatalf("%d ticks between %g and %g", len(list), low, high)
		}
		for i, x := range list {
			if room := (high - low) * 1e-6; x.at < low-room || x.at > high+room || i > 0 && x.label == list[i-1].label {
				t.Fatalf("tick %v between %g and %g", x, low, high)
			}
		}
	})
}

// A line breaks where a minute is missing, and a lone minute is still seen.
func TestLineBreaksAtGaps(t *testing.T) {
	f := newFigure("t", "", 100, 0, 10, 0, 10)
	nan := math.NaN()
	p := f.path([]float64{0, 1, 2, 3, 4, 5}, []float64{1, 2, nan, 3, nan, nan})
	if strings.Count(p, "M") != 2 || strings.Count(p, "L") != 1 || strings.Count(p, "h.6") != 1 {
		t.Errorf("path %s", p)
	}
}

func TestWorstOfACell(t *testing.T) {
	for _, x := range []struct {
		accepted, questioned, rejected, absent int32
		want                                   rules.Verdict
	}{{30, 0, 0, 0, rules.Accepted}, {29, 0, 1, 0, rules.Accepted}, {27, 0, 3, 0, rules.Rejected}, {20, 10, 0, 0, rules.Questioned}, {0, 0, 0, 30, rules.Absent}, {0, 0, 0, 0, rules.Absent}, {10, 0, 0, 20, rules.Absent}} {
		var c cell
		c[rules.Accepted], c[rules.Questioned], c[rules.Rejected], c[rules.Absent] = x.accepted, x.questioned, x.rejected, x.absent
		if got := c.worst(); got != x.want {
			t.Errorf("%+v: %s, want %s", x, got, x.want)
		}
	}
}

// manyStations is a network of n stations with a day of verdicts each.
func manyStations(n int) *Console {
	site := &rules.Site{}
	c := New(Config{Archive: func(func(*store.Archive) error) error { return nil }, Site: func() *rules.Site { return site }, Now: func() time.Time { return laterThatDay }})
	verdicts := make([]rules.Verdict, minute.PerDay)
	for i := range verdicts {
		verdicts[i] = rules.Accepted
		if i/40%7 == 3 {
			verdicts[i] = rules.Questioned
		}
	}
	for i := range n {
		st := rules.Station{ID: fmt.Sprintf("s%04d", i), Name: fmt.Sprintf("Station %d", i), LatitudeDeg: float64(i%120) - 60, LongitudeDeg: float64(i%360) - 180}
		site.Stations = append(site.Stations, st)
		j := &engine.Judged{Station: st.ID, Day: laterThatDay.Unix()/86400 - 1, Rows: minute.PerDay}
		for _, q := range []rules.Quantity{rules.Global, rules.Direct, rules.Diffuse, rules.LWDown} {
			j.Series = append(j.Series, engine.Series{Instrument: q.String(), Quantity: q, Primary: true, Verdict: verdicts})
		}
		c.Minutes(j, 0, minute.PerDay)
		if i%50 == 0 {
			c.Episodes(st.ID, []fault.Episode{{ID: "x", Station: st.ID, Instrument: "G1", Kind: rules.DomeWet, Severity: rules.Act, From: 29000000, To: fault.Open}})
		}
	}
	return c
}

func BenchmarkNetworkPage2000(b *testing.B) {
	c := manyStations(2000)
	h := c.Handler()
	for b.Loop() {
		for _, s := range c.states { // each row is made anew, as after a minute of every station
			s.version++
		}
		if w := ask(b, h, "/"); w.Code != 200 {
			b.Fatal(w.Code)
		}
	}
}

func BenchmarkDayPage(b *testing.B) {
	h := keptConsole(b).Handler()
	r := httptest.NewRequest("GET", "/station/northmoor/day/2026-06-30", nil)
	r.Header.Set("Accept-Encoding", "gzip")
	n := 0
	for b.Loop() {
		w := httptest.NewRecorder()
		h.ServeHTTP(w, r)
		size, _ := io.Copy(io.Discard, w.Body)
		n = int(size)
	}
	b.ReportMetric(float64(n), "wire-bytes")
}
