package rules

import (
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"
)

func read(t testing.TB, name string) string {
	t.Helper()
	text, err := os.ReadFile(filepath.Join(siteFolder, name))
	if err != nil {
		t.Fatal(err)
	}
	return string(text)
}

func parsed(t testing.TB, text string) *Site {
	t.Helper()
	site, err := Parse("x.yaml", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	return site
}

// The digests of the examples are golden: a change of them is a change of the canonical form, and archives hold the old ones.
// When it is meant, raise digestVersion and put the new ones here.
func TestGoldenDigests(t *testing.T) {
	for file, want := range map[string]string{
		"northmoor.yaml": "47f458d0985f74643aaecd595e8c2ee43ac825f8937b70f7700be3c1e792be2f",
		"saltpan.yaml":   "7fc89a68fdd7a3927deed276e4bae7b6f9327ad8640098d71de5f83d27ec4d5d",
		"coralkey.yaml":  "65b30e61c36da558e1bda1127dbe49aa6a2c17286967cfe6bba80ed21767be44",
	} {
		if got := parsed(t, read(t, file)).Digest; got != want {
			t.Errorf("%s has the digest %s, want %s", file, got, want)
		}
	}
}

func TestDigestIgnoresWhatCannotChangeARow(t *testing.T) {
	text := read(t, "northmoor.yaml")
	before := parsed(t, text)
	for _, c := range [][2]string{
		{"name: North Moor", "name: Northern Moor"},
		{"licence: CC-BY-4.0", "licence: CC0"},
		{"certificate: W-24-118", "certificate: W-24-119"},
		{"sensitivity: 8.71,", "sensitivity: 8.710,"},
		{"# degrees north", "# north"},
		{"  contact:", "\n\n  contact:"},
		{"time: {label: end, interval: 60s}", "time: {interval: 1m, label: end}"},
		{"      supply: {channel: batt_v, low: 11.5}\n      tracker: trk_mode\n", "      tracker: trk_mode\n      supply: {channel: batt_v, low: 11.5}\n"},
		{"{closure.floor: 15}", "{closure.floor: 15, closure.high_sun: 0.08}"}, // the default, written out
		{"limits: {closure.floor: 15}", "limits: {closure.floor: 15}\n      products: {night_negatives: keep}"},
		{"to: 2026-01-01, ", ""}, // it ends there anyhow
	} {
		if after := parsed(t, swap(t, text, c)); after.Digest != before.Digest {
			t.Errorf("%q for %q changes the digest", c[1], c[0])
		}
	}
}

func TestDigestFollowsWhatCanChangeARow(t *testing.T) {
	text := read(t, "northmoor.yaml")
	seen := map[string]string{parsed(t, text).Digest: "the file as it is"}
	for _, c := range [][2]string{
		{"latitude: 57.121", "latitude: 57.122"},
		{"longitude: -3.642", "longitude: -3.643"},
		{"elevation: 640", "elevation: 641"},
		{"label: end", "label: start"},
		{"interval: 60s", "interval: 30s"},
		{"[90, 5.5]", "[90, 5.6]"},
		{"sensitivity: 8.62", "sensitivity: 8.63"},
		{"from: 2026-01-01, sensitivity: 8.62", "from: 2026-01-01T00:00:01Z, sensitivity: 8.62"},
		{"uncertainty: 1.2%, scale: WRR, certificate: W-26-007", "uncertainty: 1.3%, scale: WRR, certificate: W-26-007"},
		{"NM-2210", "NM-2211"},
		{"k3: 2.9", "k3: 3.0"},
		{"-0.0002", "-0.0003"},
		{"range: [-5, 25]", "range: [-5, 30]"},
		{"limits: {closure.floor: 15}", "limits: {closure.floor: 15}\n      products: {night_negatives: zero}"},
		{"class: B", "class: C"},
		{"dome: l1_dome_c", "dome: l1_dome_k, dome_unit: K"},
		{"shaded: true", "shaded: false"},
		{"pressure: p_hpa", "pressure: p2_hpa"},
		{"low: 11.5", "low: 11.6"},
		{"closure.floor: 15", "closure.floor: 16"},
		{"sampling.share: 0.8", "sampling.share: 0.7"},
	} {
		// a calibration moved by a second must not leave a hole
		changed := strings.Replace(swap(t, text, c), "to: 2026-01-01, ", "", 1)
		d := parsed(t, changed).Digest
		if other, ok := seen[d]; ok {
			t.Errorf("%q for %q has the digest of %s", c[1], c[0], other)
		}
		seen[d] = c[1]
	}
}

func swap(t *testing.T, text string, c [2]string) string {
	t.Helper()
	if !strings.Contains(text, c[0]) {
		t.Fatalf("the example no longer holds %q; mend the test", c[0])
	}
	return strings.Replace(text, c[0], c[1], 1)
}

func TestStationDigests(t *testing.T) {
	text := read(t, "coralkey.yaml")
	cut := strings.Index(text, "  - id: coralkey")
	head, body := text[:cut], text[cut:]
	second := strings.Index(body, "  - id: frostbight")
	a, b := parsed(t, text), parsed(t, head+body[second:]+body[:second])
	if a.Digest != b.Digest {
		t.Error("the order of the stations changes the site's digest")
	}
	for i := range a.Stations {
		if st := b.Station(a.Stations[i].ID); st == nil || st.Digest != a.Stations[i].Digest {
			t.Errorf("the order of the stations changes the digest of %s", a.Stations[i].ID)
		}
	}
	c := parsed(t, swap(t, text, [2]string{"elevation: 3\n", "elevation: 4\n"}))
	if c.Station("coralkey").Digest == a.Station("coralkey").Digest || c.Station("frostbight").Digest != a.Station("frostbight").Digest {
		t.Error("a change at coralkey has to change its digest and no other")
	}
}

// The struct and the canonical form may not drift apart: who adds a field decides here whether it can change a row.
func TestEveryFieldIsDecided(t *testing.T) {
	for name, c := range map[string]struct {
		of   any
		want int
	}{
		"Station": {Station{}, 18}, "Products": {Products{}, 1}, "Timing": {Timing{}, 2}, "Instrument": {Instrument{}, 16}, "Input": {Input{}, 10}, "Calibration": {Calibration{}, 13},
		"WeatherInput": {WeatherInput{}, 3}, "HousekeepingInput": {HousekeepingInput{}, 8}, "Sky": {Sky{}, 7}, "SkyMonths": {SkyMonths{}, 4}, "SkyChannels": {SkyChannels{}, 4},
	} {
		if got := reflect.TypeOf(c.of).NumField(); got != c.want {
			t.Errorf("%s has %d fields, the digest knows %d: add the new one to canonical in digest.go if it can change a row, then put the count right here", name, got, c.want)
		}
	}
	var l Limits
	for i := range limitTable {
		*limitTable[i].field(&l) = 1 // each row of the table has its own place
	}
	if n := countOnes(reflect.ValueOf(l)); n != len(limitTable) || n != countAll(reflect.ValueOf(l)) {
		t.Errorf("the limit table has %d rows for %d places of %d", len(limitTable), n, countAll(reflect.ValueOf(l)))
	}
}

func countOnes(v reflect.Value) int { return count(v, func(x float64) bool { return x == 1 }) }
func countAll(v reflect.Value) int  { return count(v, func(float64) bool { return true }) }

func count(v reflect.Value, is func(float64) bool) int {
	n := 0
	switch v.Kind() {
	case reflect.Struct:
		for i := range v.NumField() {
			n += count(v.Field(i), is)
		}
	case reflect.Array:
		for i := range v.Len() {
			n += count(v.Index(i), is)
		}
	case reflect.Float64:
		if is(v.Float()) {
			n++
		}
	}
	return n
}
