package rules

import (
	"bytes"
	"errors"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

const siteFolder = "../testdata/site"

func goodFiles(t testing.TB) []string {
	t.Helper()
	files, err := filepath.Glob(filepath.Join(siteFolder, "*.yaml"))
	if err != nil || len(files) < 3 {
		t.Fatalf("%s holds %d good site files (%v); keep the three examples there", siteFolder, len(files), err)
	}
	return files
}

func badFiles(t testing.TB) []string {
	t.Helper()
	files, err := filepath.Glob(filepath.Join(siteFolder, "bad", "*.bad.yaml"))
	if err != nil || len(files) < 30 {
		t.Fatalf("%s/bad holds %d bad site files (%v); there are to be 30 at least", siteFolder, len(files), err)
	}
	return files
}

func TestGoodSites(t *testing.T) {
	for _, file := range goodFiles(t) {
		site, err := Load(file)
		if err != nil {
			t.Errorf("%s is refused:\n%v", file, err)
			continue
		}
		for _, w := range site.Warnings {
			t.Errorf("%s warns: %v", file, w)
		}
	}
}

// TestBadSites reads each file of the folder; its first lines, "# want: text", say what the error has to contain. A file
// that is to be read with a warning says "# warn: text".
func TestBadSites(t *testing.T) {
	for _, file := range badFiles(t) {
		t.Run(strings.TrimSuffix(filepath.Base(file), ".bad.yaml"), func(t *testing.T) {
			text, err := os.ReadFile(file)
			if err != nil {
				t.Fatal(err)
			}
			wants := 0
			site, err := Load(file)
			for _, line := range strings.Split(string(text), "\n") {
				want, isWant := strings.CutPrefix(strings.TrimSpace(line), "# want: ")
				warn, isWarn := strings.CutPrefix(strings.TrimSpace(line), "# warn: ")
				switch {
				case isWant:
					if err == nil || !strings.Contains(err.Error(), want) {
						t.Errorf("error lacks %q; got:\n%v", want, err)
					}
				case isWarn:
					if site == nil || !strings.Contains(Problems(site.Warnings).Error(), warn) {
						t.Errorf("warnings lack %q; got %+v, %v", warn, site, err)
					}
				default:
					continue
				}
				wants++
			}
			if wants == 0 {
				t.Fatalf("%s has no line `# want: text`", file)
			}
			var problems Problems
			if err != nil && !errors.As(err, &problems) {
				t.Fatalf("error is a %T, not Problems", err)
			}
			for _, p := range problems {
				if p.File != file || p.What == "" || p.Mend == "" || (p.Line == 0) != (p.Column == 0) {
					t.Errorf("a problem without file, line, cause or mend: %+v", p)
				}
			}
		})
	}
}

func TestNorthmoor(t *testing.T) {
	site, err := Load(filepath.Join(siteFolder, "northmoor.yaml"))
	if err != nil {
		t.Fatal(err)
	}
	st := site.Station("northmoor")
	if st == nil || site.Station("southmoor") != nil {
		t.Fatal("Station finds the wrong ones")
	}
	if st.LatitudeDeg != 57.121 || st.LongitudeDeg != -3.642 || st.ElevationM != 640 || !st.Time.LabelEnd || st.Time.Interval != time.Minute {
		t.Errorf("place or time: %+v", st)
	}
	if len(st.Horizon) != 5 || st.Horizon[1] != (HorizonPoint{90, 5.5}) {
		t.Errorf("horizon: %v", st.Horizon)
	}
	if st.Limits.ClosureFloorWm2 != 15 || st.Limits.SamplingShare != 0.8 || st.Limits.ClosureHigh != DefaultLimits().ClosureHigh {
		t.Errorf("limits: %+v", st.Limits)
	}
	g := st.Instruments[0]
	if !g.Primary || g.Measures != Global || g.Class != "A" || g.Input.Signal != "g1_mv" || g.Input.SignalUnit != "mV" || g.Input.SignalMin != -5 || g.Input.SignalMax != 25 {
		t.Errorf("G1: %+v", g)
	}
	year := time.Date(2026, 1, 1, 0, 0, 0, 0, time.UTC)
	if len(g.Calibrations) != 2 || g.Calibrations[0].To != year || g.Calibrations[1].From != year || !g.Calibrations[1].To.IsZero() {
		t.Errorf("calibrations of G1: %+v", g.Calibrations)
	}
	if c := g.Calibrations[1]; c.Serial != "NM-1041" || c.SensitivityUVPerW != 8.62 || c.UncertaintyPercent != 1.2 || c.K2 != 1 || len(c.TemperatureCoeff) != 2 {
		t.Errorf("calibration: %+v", c)
	}
	if d := st.Instruments[3]; math.Abs(d.Calibrations[0].SensitivityUVPerW-8.115) > 1e-12 || !d.Primary {
		t.Errorf("D1: %+v", d)
	}
	if l := st.Instruments[4]; !l.Shaded || l.Input.CaseUnit != "degC" || l.Input.Dome != "l1_dome_c" || l.Calibrations[0].K3 != 2.9 {
		t.Errorf("L1: %+v", l)
	}
	if h := st.Housekeeping; len(h) != 3 || h[0].Name != "fan" || h[0].Channel != "g1_fan_rpm" || h[0].Low != 500 || h[0].High != 4000 || h[0].Kind != FanHouse || !math.IsNaN(h[1].High) || h[2].Channel != "trk_mode" {
		t.Errorf("housekeeping: %+v", h)
	}
	if w := st.Weather; len(w) != 4 || w[0] != (WeatherInput{AirTemperature, "ta_c", "degC"}) {
		t.Errorf("weather: %+v", w)
	}
}

// A file saved on another system reads alike.
func TestLineEndsAndByteOrderMark(t *testing.T) {
	text, err := os.ReadFile(filepath.Join(siteFolder, "northmoor.yaml"))
	if err != nil {
		t.Fatal(err)
	}
	plain, err := Parse("a", text)
	if err != nil {
		t.Fatal(err)
	}
	other, err := Parse("b", append([]byte("\xef\xbb\xbf"), bytes.ReplaceAll(text, []byte("\n"), []byte("\r\n"))...))
	if err != nil {
		t.Fatal(err)
	}
	if plain.Digest != other.Digest {
		t.Error("CRLF and a byte order mark change the digest")
	}
}

func TestWholeFileProblems(t *testing.T) {
	for _, c := range []struct{ name, text, want string }{
		{"empty", "", "x.yaml: the file is empty; write network: and stations:"},
		{"comment only", "# nothing yet\n", "the file is empty"},
		{"null", "~\n", "the file is empty"},
		{"list", "- a\n", "x.yaml:1:1: the file is a list of 1, not keys and values"},
		{"latin", "network: {id: a, name: M\xe5l}\n", "x.yaml:1:25: the file is not UTF-8; save the file as UTF-8"},
		{"large", "#" + strings.Repeat("x", siteBytesMax), "the file is too large; keep it under 4 MiB"},
		{"tab", "network:\n\tid: a\n", "x.yaml:2:1: not YAML: the line is indented with a tab; indent with spaces"},
		{"second document", "network: {id: a}\n---\nnetwork: {id: b}\n", "second YAML document"},
	} {
		_, err := Parse("x.yaml", []byte(c.text))
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: want %q, got %v", c.name, c.want, err)
		}
	}
	if _, err := Load(filepath.Join(siteFolder, "nothing-here.yaml")); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("a missing file gives %v", err)
	}
}

// A hostile file may not fill memory with messages.
func TestProblemsAreBounded(t *testing.T) {
	_, err := Parse("x", []byte("network: {id: a}\n"+strings.Repeat("a: 1\n", 100000)))
	var problems Problems
	if !errors.As(err, &problems) || len(problems) > problemsMax {
		t.Fatalf("got %d problems, want at most %d", len(problems), problemsMax)
	}
}

func TestNearest(t *testing.T) {
	for _, c := range []struct{ written, want string }{{"sensitvity", "sensitivity"}, {"lattitude", "latitude"}, {"from", "from"}, {"senstiivity", "sensitivity"}, {"zzzz", ""}} {
		if got, _ := nearest(c.written, []string{"from", "latitude", "sensitivity", "uncertainty"}); got != c.want {
			t.Errorf("nearest to %q is %q, want %q", c.written, got, c.want)
		}
	}
	if d := edits("kitten", "sitting"); d != 3 {
		t.Errorf("edits kitten sitting = %d, want 3 (the textbook example)", d)
	}
}
