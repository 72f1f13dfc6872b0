package wire

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"reflect"
	"slices"
	"strings"
	"testing"

	"pgregory.net/rapid"

	"fluxwarden/qc/minute"
)

func TestDecodeJSONReasons(t *testing.T) {
	const ok = Reason("")
	reading := func(x string) string { return `{"t":"2026-06-21T12:00:01Z","x":` + x + `}` }
	channels := func(n int) string {
		var b strings.Builder
		for i := range n {
			fmt.Fprintf(&b, `%s"c%d":1`, strings.Repeat(",", min(i, 1)), i)
		}
		return "{" + b.String() + "}"
	}
	for _, c := range []struct {
		name, payload string
		want          Reason
		index         int
	}{
		{"one", reading(`{"g1_mv":8.213}`), ok, 0},
		{"keys in the other order", `{"x":{"g1_mv":8.213},"t":"2026-06-21T12:00:01Z"}`, ok, 0},
		{"space everywhere", " \t\r\n[ " + reading(` { "g1_mv" : 8.213 , "a" : null } `) + " ] \n", ok, 0},
		{"no channels", reading(`{}`), ok, 0},
		{"empty array", `[]`, ok, 0},
		{"null value", reading(`{"g1_mv":null}`), ok, 0},
		{"escaped key and name", `{"\u0074":"2026-06-21T12:00:01Z","x":{"g1\u005fmv":1}}`, ok, 0},
		{"averaged", reading(`{"g1_mv":{"mean":8.2,"sd":0.1,"min":8,"max":8.4,"n":60}}`), ok, 0},
		{"averaged, mean null", reading(`{"g1_mv":{"mean":null,"n":60}}`), ok, 0},
		{"empty", ``, NotJSON, Whole},
		{"text", `hello`, NotJSON, Whole},
		{"half", `{"t":"2026-06-21T12:00:01Z","x":{"g1`, NotJSON, Whole},
		{"two objects", reading(`{}`) + reading(`{}`), NotJSON, Whole},
		{"comma at the end", "[" + reading(`{}`) + ",]", NotJSON, Whole},
		{"NaN", reading(`{"g1_mv":NaN}`), NotJSON, Whole},
		{"Infinity", reading(`{"g1_mv":-Infinity}`), NotJSON, Whole},
		{"leading zero", reading(`{"g1_mv":08}`), NotJSON, Whole},
		{"bare point", reading(`{"g1_mv":.5}`), NotJSON, Whole},
		{"deep", strings.Repeat("[", 100_000), TooDeep, Whole},
		{"deep in a reading", reading(strings.Repeat(`{"a":`, 20) + "1" + strings.Repeat("}", 20)), TooDeep, Whole},
		{"large", "[" + strings.Repeat(" ", PayloadBytesMax) + "]", TooLarge, Whole},
		{"many readings", "[" + strings.Repeat(`{},`, ReadingsMax) + "{}]", TooManyReadings, Whole},
		{"many channels", reading(channels(ChannelsMax + 1)), TooManyChannels, Whole},
		{"as many channels as may be", reading(channels(ChannelsMax)), ok, 0},
		{"text as a value", reading(`{"g1_mv":"NaN"}`), BadValue, Whole},
		{"true as a value", reading(`{"g1_mv":true}`), BadValue, Whole},
		{"1e400", reading(`{"g1_mv":1e400}`), BadValue, Whole},
		{"array as a value", reading(`{"g1_mv":[1]}`), BadValue, Whole},
		{"a number as a reading", `[1]`, BadValue, 0},
		{"x is null", reading(`null`), BadValue, Whole},
		{"min above max", reading(`{"g1_mv":{"mean":1,"min":3,"max":2}}`), BadValue, Whole},
		{"negative sd", reading(`{"g1_mv":{"mean":1,"sd":-1}}`), BadValue, Whole},
		{"n of zero", reading(`{"g1_mv":{"mean":1,"n":0}}`), BadValue, Whole},
		{"n of a half", reading(`{"g1_mv":{"mean":1,"n":1.5}}`), BadValue, Whole},
		{"no mean", reading(`{"g1_mv":{"n":60}}`), MissingKey, Whole},
		{"unknown statistic", reading(`{"g1_mv":{"mean":1,"avg":1}}`), UnknownKey, Whole},
		{"mean twice", reading(`{"g1_mv":{"mean":1,"mean":1}}`), DuplicateKey, Whole},
		{"unknown key", `{"t":"2026-06-21T12:00:01Z","x":{},"y":1}`, UnknownKey, Whole},
		{"other case of a key", `{"T":"2026-06-21T12:00:01Z","x":{}}`, UnknownKey, Whole},
		{"no t", `{"x":{}}`, MissingKey, Whole},
		{"no x", `{"t":"2026-06-21T12:00:01Z"}`, MissingKey, Whole},
		{"t twice", `{"t":"2026-06-21T12:00:01Z","t":"2026-06-21T12:00:01Z","x":{}}`, DuplicateKey, Whole},
		{"channel twice", reading(`{"a":1,"b":2,"a":1}`), DuplicateKey, Whole},
		{"channel twice, first null", reading(`{"a":null,"b":2,"a":1}`), DuplicateKey, Whole},
		{"channel twice, then null", reading(`{"a":1,"b":2,"a":null}`), DuplicateKey, Whole},
		{"channel twice among many", reading(strings.Replace(channels(100), `"c99"`, `"c3"`, 1)), DuplicateKey, Whole},
		{"upper case channel", reading(`{"G1":1}`), BadChannel, Whole},
		{"nameless channel", reading(`{"":1}`), BadChannel, Whole},
		{"bad UTF-8 in a name", reading("{\"g\xff\":1}"), BadChannel, Whole},
		{"long channel", reading(`{"` + strings.Repeat("a", 65) + `":1}`), BadChannel, Whole},
		{"no zone", `{"t":"2026-06-21T12:00:01","x":{}}`, BadTime, Whole},
		{"time as a number", `{"t":1782043201,"x":{}}`, BadTime, Whole},
		{"second in an array", "[" + reading(`{}`) + `,{"t":"yesterday","x":{}},` + reading(`{}`) + "]", BadTime, 1},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, err := DecodeJSON([]byte(c.payload), nil)
			var r *Refusal
			switch {
			case c.want == ok && err != nil:
				t.Fatalf("refused: %v", err)
			case c.want == ok:
			case !errors.As(err, &r):
				t.Fatalf("not refused, want %s", c.want)
			case r.Reason != c.want:
				t.Fatalf("reason is %s (%s), want %s", r.Reason, r.Detail, c.want)
			case (r.Index == Whole) != (c.index == Whole) && c.payload[0] == '[':
				t.Fatalf("index is %d, want %d", r.Index, c.index)
			}
			sameAsReference(t, []byte(c.payload))
		})
	}
}

func TestDecodeKeepsTheSoundReadingsOfAnArray(t *testing.T) {
	payload := []byte(`[{"t":"2026-06-21T12:00:01Z","x":{"a":1}},{"t":"bad","x":{"a":[{"b":"]"}]}}, {"t":"2026-06-21T12:00:03Z","x":{"a":3}}]`)
	var d Decoder
	got, refused := d.Decode(payload, nil)
	if len(got) != 2 || got[1].Values[0].Mean != 3 {
		t.Fatalf("kept %+v", got)
	}
	if len(refused) != 1 || refused[0].Index != 1 || string(payload[refused[0].Start:refused[0].End]) != `{"t":"bad","x":{"a":[{"b":"]"}]}}` {
		t.Fatalf("refused %+v", refused)
	}
}

// A reading's values must not change when the decoder goes on to other payloads.
func TestDecodedValuesAreNotUsedAgain(t *testing.T) {
	var d Decoder
	first, _ := d.Decode([]byte(`[{"t":"2026-06-21T12:00:01Z","x":{"a":1,"b":2}},{"t":"2026-06-21T12:00:02Z","x":{"a":3}}]`), nil)
	second, _ := d.Decode([]byte(`{"t":"2026-06-21T12:00:01Z","x":{"c":7,"d":8,"e":9}}`), nil)
	_ = append(first[0].Values, second[0].Values...)
	if v := first[0].Values; v[0].Channel != "a" || v[0].Mean != 1 || v[1].Mean != 2 || first[1].Values[0].Mean != 3 {
		t.Errorf("values changed: %+v", first)
	}
}

// reference decodes with encoding/json alone: slow, and written without looking at the fast one.
func reference(payload []byte) (readings []minute.Reading, refused int, whole bool) {
	if len(payload) > PayloadBytesMax || !json.Valid(payload) || referenceDepth(payload) > DepthMax {
		return nil, 1, true
	}
	trimmed := bytes.TrimSpace(payload)
	items := []json.RawMessage{trimmed}
	if trimmed[0] == '[' {
		if json.Unmarshal(trimmed, &items) != nil || len(items) > ReadingsMax {
			return nil, 1, true
		}
	}
	for _, item := range items {
		if r, ok := referenceReading(item); ok {
			readings = append(readings, r)
		} else {
			refused++
		}
	}
	return readings, refused, false
}

func referenceDepth(payload []byte) (deepest int) {
	d := json.NewDecoder(bytes.NewReader(payload))
	depth := 0
	for {
		token, err := d.Token()
		if err != nil {
			return deepest
		}
		switch token {
		case json.Delim('{'), json.Delim('['):
			depth++
			deepest = max(deepest, depth)
		case json.Delim('}'), json.Delim(']'):
			depth--
		}
	}
}

type member struct {
	key   string
	value json.RawMessage
}

// members takes an object apart, keeping order and repeats.
func members(object []byte) (out []member, ok bool) {
	d := json.NewDecoder(bytes.NewReader(object))
	if token, err := d.Token(); err != nil || token != json.Delim('{') {
		return nil, false
	}
	seen := map[string]bool{}
	for d.More() {
		key, _ := d.Token()
		var raw json.RawMessage
		if d.Decode(&raw) != nil || seen[key.(string)] {
			return nil, false
		}
		seen[key.(string)] = true
		out = append(out, member{key.(string), raw})
	}
	return out, true
}

func referenceReading(item []byte) (r minute.Reading, ok bool) {
	parts, ok := members(item)
	if !ok || len(parts) != 2 {
		return r, false
	}
	for _, p := range parts {
		switch p.key {
		case "t":
			var s *string
			if json.Unmarshal(p.value, &s) != nil || s == nil {
				return r, false
			}
			if r.At, ok = ParseTime([]byte(*s)); !ok {
				return r, false
			}
		case "x":
			if r.Values, ok = referenceValues(p.value); !ok {
				return r, false
			}
		default:
			return r, false
		}
	}
	return r, true
}

func referenceValues(object []byte) (values []minute.ChannelValue, ok bool) {
	channels, ok := members(object)
	if !ok || len(channels) > ChannelsMax {
		return nil, false
	}
	for _, c := range channels {
		if c.key == "" || len(c.key) > ChannelNameBytesMax || strings.Trim(c.key, "abcdefghijklmnopqrstuvwxyz0123456789_.-") != "" {
			return nil, false
		}
		for _, letter := range c.key { // Trim looks at the ends only
			if !strings.ContainsRune("abcdefghijklmnopqrstuvwxyz0123456789_.-", letter) {
				return nil, false
			}
		}
		v, present, ok := referenceValue(c.value)
		if !ok {
			return nil, false
		}
		if present {
			values = append(values, minute.ChannelValue{Channel: c.key, Value: v})
		}
	}
	return values, true
}

func referenceValue(raw []byte) (v minute.Value, present, ok bool) {
	if raw[0] != '{' {
		var x *float64
		if json.Unmarshal(raw, &x) != nil {
			return v, false, false
		}
		if x == nil {
			return v, false, true
		}
		return minute.Single(*x), true, true
	}
	parts, ok := members(raw)
	if !ok {
		return v, false, false
	}
	got := map[string]*float64{}
	for _, p := range parts {
		var x *float64
		if !slices.Contains([]string{"mean", "sd", "min", "max", "n"}, p.key) || json.Unmarshal(p.value, &x) != nil {
			return v, false, false
		}
		got[p.key] = x
	}
	if _, ok := got["mean"]; !ok {
		return v, false, false
	}
	part := func(key string) float64 {
		if got[key] == nil {
			return math.NaN()
		}
		return *got[key]
	}
	n := part("n")
	if got["n"] == nil {
		n = 1
	}
	if n < 1 || n > SamplesMax || n != math.Floor(n) || part("sd") < 0 || part("min") > part("max") {
		return v, false, false
	}
	return minute.Value{Mean: part("mean"), SD: part("sd"), Min: part("min"), Max: part("max"), N: int32(n)}, got["mean"] != nil, true
}

// sameAsReference holds the fast decoder against the slow one.
func sameAsReference(t *testing.T, payload []byte) {
	t.Helper()
	var d Decoder
	got, refused := d.Decode(payload, nil)
	want, wantRefused, whole := reference(payload)
	isWhole := len(got) == 0 && len(refused) == 1 && refused[0].Start == 0 && refused[0].End == len(payload)
	if whole && !isWhole {
		t.Fatalf("%.200q: the reference refuses the whole, the decoder gives %d readings and %v", payload, len(got), refused)
	}
	if !whole && (len(got) != len(want) || len(refused) != wantRefused) {
		t.Fatalf("%.200q: %d readings and refusals %v, the reference has %d and %d", payload, len(got), refused, len(want), wantRefused)
	}
	for i := range want {
		if !sameReading(&got[i], &want[i]) {
			t.Fatalf("%.200q: reading %d is %+v, the reference has %+v", payload, i, got[i], want[i])
		}
	}
}

func sameReading(a, b *minute.Reading) bool {
	if a.At != b.At || a.Received != b.Received || a.Ahead != b.Ahead || len(a.Values) != len(b.Values) {
		return false
	}
	for i := range a.Values {
		x, y := a.Values[i], b.Values[i]
		if x.Channel != y.Channel || x.N != y.N || !same(x.Mean, y.Mean) || !same(x.SD, y.SD) || !same(x.Min, y.Min) || !same(x.Max, y.Max) {
			return false
		}
	}
	return true
}

func same(a, b float64) bool { return a == b || (math.IsNaN(a) && math.IsNaN(b)) }

func FuzzDecodeJSON(f *testing.F) {
	files, err := filepath.Glob("../../testdata/wire/*.json")
	if err != nil || len(files) == 0 {
		f.Fatalf("no seeds in testdata/wire: %v", err)
	}
	for _, file := range files {
		b, err := os.ReadFile(file)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(b)
	}
	f.Fuzz(func(t *testing.T, payload []byte) { sameAsReference(t, payload) })
}

// someReadings draws readings that the wire can carry.
func someReadings(t *rapid.T) []minute.Reading {
	number := rapid.Float64().Filter(func(v float64) bool { return !math.IsInf(v, 0) && !math.IsNaN(v) })
	n := rapid.IntRange(0, 5).Draw(t, "readings")
	readings := make([]minute.Reading, n)
	for i := range readings {
		readings[i].At = minute.Stamp(rapid.Int64Range(-631152000_000000, 4133980799_999999).Draw(t, "at")) // 1950 to 2100
		for _, name := range rapid.SliceOfNDistinct(rapid.StringMatching(`[a-z0-9_.-]{1,12}`), 0, 6, rapid.ID).Draw(t, "names") {
			v := minute.Single(number.Draw(t, "value") + 0)
			if rapid.Bool().Draw(t, "averaged") {
				v.SD, v.N = math.Abs(number.Draw(t, "sd")), rapid.Int32Range(1, SamplesMax).Draw(t, "n")
				if rapid.Bool().Draw(t, "no extremes") {
					v.Min, v.Max = math.NaN(), math.NaN()
				}
			}
			readings[i].Values = append(readings[i].Values, minute.ChannelValue{Channel: name, Value: v})
		}
	}
	return readings
}

func TestWhatIsEncodedIsDecoded(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		want := someReadings(t)
		got, err := DecodeJSON(EncodeJSON(nil, want), nil)
		if err != nil {
			t.Fatal(err)
		}
		if len(got) != len(want) {
			t.Fatalf("%d readings, want %d", len(got), len(want))
		}
		for i := range want {
			if !sameReading(&got[i], &want[i]) {
				t.Fatalf("reading %d: %+v, want %+v", i, got[i], want[i])
			}
		}
	})
}

func TestReasonsAreListedOnce(t *testing.T) {
	seen := map[Reason]bool{}
	for _, r := range Reasons {
		if seen[r] || r == "" {
			t.Errorf("%q is there twice or empty", r)
		}
		seen[r] = true
	}
}

var onePayload = []byte(`{"t":"2026-06-21T12:00:01Z","x":{"g1_mv":8.213,"d1_mv":0.412,"n1_mv":7.901,"l1_mv":-0.31,"l1_case_c":18.4,"ta_c":17.9,"rh_pct":61.2}}`)

func BenchmarkDecodeJSON(b *testing.B) {
	var d Decoder
	var readings []minute.Reading
	b.SetBytes(int64(len(onePayload)))
	b.ReportAllocs()
	for b.Loop() {
		readings, _ = d.Decode(onePayload, readings[:0])
	}
	if len(readings) != 1 {
		b.Fatal("not decoded")
	}
}

func BenchmarkJournal(b *testing.B) {
	var d Decoder
	group := Group{Station: "northmoor"}
	for range 100 {
		group.Readings, _ = d.Decode(onePayload, group.Readings)
	}
	frame := AppendJournal(nil, []Group{group})
	b.Run("append", func(b *testing.B) {
		for b.Loop() {
			frame = AppendJournal(frame[:0], []Group{group})
		}
		b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/100, "ns/reading")
		b.ReportMetric(float64(len(frame))/100, "B/reading")
	})
	b.Run("decode", func(b *testing.B) {
		for b.Loop() {
			if g, err := DecodeJournal(frame); err != nil || !reflect.DeepEqual(g[0].Station, "northmoor") {
				b.Fatal(err)
			}
		}
		b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/100, "ns/reading")
	})
}
