package field

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"fluxwarden/ingest/wire"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// layoutOf reads a layout as a site file has it.
func layoutOf(t testing.TB, text string) *rules.FileLayout {
	t.Helper()
	site, err := rules.Parse("site.yaml", []byte(`network: {id: n}
stations:
  - id: northmoor
    latitude: 1
    longitude: 2
    elevation: 3
    instruments: [{id: G, measures: global, input: {irradiance: ghi}}]
    files: [`+text+`]
`))
	if err != nil {
		t.Fatal(err)
	}
	return &site.Stations[0].Files[0]
}

func TestLines(t *testing.T) {
	for _, c := range []struct{ name, layout, file, want string }{
		{"header, units, quoted times, missing marks",
			`{path: x, skip: 1, after_header: 2, time: [TIMESTAMP], time_format: "YYYY-MM-DD hh:mm:ss", zone: UTC, missing: [-7999], columns: {ghi: SR_Avg, ta_c: T}}`,
			"\ufeffTOA5,unit 7\r\n\"TIMESTAMP\",\"RECORD\",\"SR_Avg\",\"T\"\r\n\"TS\",\"RN\",\"W/m2\",\"C\"\r\n\"\",\"\",\"Avg\",\"Avg\"\r\n\"2026-06-21 12:00:01\",1,801.5,17.9\r\n\"2026-06-21 12:00:02\",2,\"NAN\",-7999.0\r\n",
			"2026-06-21T12:00:01Z ghi=801.5 ta_c=17.9\n2026-06-21T12:00:02Z\n"},
		{"day first, semicolons, decimal comma, a zone",
			`{path: x, delimiter: semicolon, decimal: comma, time: [Date, Time], time_format: "DD/MM/YYYY hh:mm", zone: "+01:00", columns: {ghi: G}}`,
			"Date;Time;G\n1/6/2026;9:05;12,5\n1/6/2026;9:06;12.5\n",
			"2026-06-01T08:05:00Z ghi=12.5\nbad_value\n"},
		{"no header, columns by number, blanks between",
			`{path: x, delimiter: space, header: false, time: [1, 2, 3], time_format: "YYYY DDD hhmm", zone: UTC, columns: {ghi: 5, ta_c: 4}}`,
			"  2026  172   1200   17.5\t801\n2026 172 1201 17.5\n2026 172 9901 1 2\n",
			"2026-06-21T12:00:00Z ghi=801 ta_c=17.5\nbad_fields\nbad_time\n"},
		{"tabs and empty fields", `{path: x, delimiter: tab, time: [t], columns: {a: a, b: b}}`,
			"t\ta\tb\n2026-06-21T14:00:00+02:00\t\t3e-1\n2026-06-21T14:00:00\t1\t2\n",
			"2026-06-21T12:00:00Z b=0.3\nbad_time\n"},
		{"garbage", `{path: x, time: [t], columns: {a: a}}`,
			"t,a\n\x00\x00\x00\n\n2026-06-21T12:00:00Z,Inf\n2026-06-21T12:00:00Z,0x10\n1970-01-01T00:00:00Z,1\n2199-01-01T00:00:00Z,1\n\"2026-06-21T12:00:00Z,1\n2026-06-21T12:00:00Z,1,2,3\n",
			"bad_fields\nbad_value\nbad_value\n1970-01-01T00:00:00Z a=1\nbad_time\nbad_fields\nbad_fields\n"},
	} {
		r := newLineReader(layoutOf(t, c.layout))
		var got strings.Builder
		for _, line := range strings.SplitAfter(c.file, "\n") {
			if line == "" {
				continue
			}
			reading, refusal, err := r.take([]byte(strings.TrimSuffix(line, "\n")))
			if err != nil {
				t.Fatal(c.name, err)
			}
			if refusal != nil {
				fmt.Fprintln(&got, refusal.Reason)
			}
			if reading != nil {
				got.Write(wire.AppendTime(nil, reading.At))
				for _, v := range reading.Values {
					fmt.Fprintf(&got, " %s=%g", v.Channel, v.Mean)
				}
				got.WriteByte('\n')
			}
		}
		if got.String() != c.want {
			t.Errorf("%s:\n%s\nwant\n%s", c.name, got.String(), c.want)
		}
	}
}

// A yard is a folder with files that are followed.
type yard struct {
	*testing.T
	dir    string
	door   *testDoor
	layout *rules.FileLayout
	f      *Follower
}

func newYard(t *testing.T, pattern string) *yard {
	y := &yard{T: t, dir: t.TempDir(), door: &testDoor{}}
	y.layout = layoutOf(t, `{path: x, time: [t], columns: {a: a}}`)
	y.layout.Path = filepath.Join(y.dir, pattern)
	y.restart()
	t.Cleanup(func() { y.f.Close() })
	return y
}

func (y *yard) restart() {
	if y.f != nil {
		y.f.Close()
	}
	y.f = NewFollower(FileSettings{Station: "northmoor", Layout: y.layout, Places: filepath.Join(y.dir, "places.json"), Door: y.door})
}

func (y *yard) look() {
	y.Helper()
	if err := y.f.Look(y.Context()); err != nil {
		y.Fatal(err)
	}
}

func (y *yard) append(name, text string) {
	y.Helper()
	f, err := os.OpenFile(filepath.Join(y.dir, name), os.O_APPEND|os.O_CREATE|os.O_WRONLY, 0o600)
	if err == nil {
		_, err = f.WriteString(text)
	}
	if err == nil {
		err = f.Close()
	}
	if err != nil {
		y.Fatal(err)
	}
}

// rows are lines of the file with the values from a to b.
func rows(a, b int) string {
	var s strings.Builder
	for i := a; i <= b; i++ {
		fmt.Fprintf(&s, "%s,%d\n", time.Date(2026, 6, 21, 12, 0, i, 0, time.UTC).Format(time.RFC3339), i)
	}
	return s.String()
}

// expect holds that exactly the values 1 to n were taken, each once.
func (y *yard) expect(n int) {
	y.Helper()
	seen := map[float64]int{}
	for _, r := range y.door.of("northmoor") {
		seen[r.Values[0].Mean]++
	}
	for i := 1; i <= n; i++ {
		if seen[float64(i)] != 1 {
			y.Errorf("value %d was taken %d times", i, seen[float64(i)])
		}
	}
	if len(seen) != n {
		y.Errorf("%d values were taken, want %d", len(seen), n)
	}
}

func TestAGrowingFileIsFollowedOverRestarts(t *testing.T) {
	y := newYard(t, "log.csv")
	y.look() // nothing there yet
	y.append("log.csv", "t,a\n"+rows(1, 3))
	y.look()
	y.append("log.csv", rows(4, 1300))
	y.restart()
	y.look()
	whole := rows(1301, 1301)
	y.append("log.csv", whole[:len(whole)-3]) // half a line
	y.look()
	y.restart()
	y.look()
	y.expect(1300)
	y.append("log.csv", whole[len(whole)-3:]+rows(1302, 1302))
	y.look()
	y.look()
	y.expect(1302)
}

func TestRotation(t *testing.T) {
	for _, kept := range []bool{true, false} { // the handle kept open, or found again after a restart
		y := newYard(t, "log.csv")
		y.append("log.csv", "t,a\n"+rows(1, 2))
		y.look()
		y.append("log.csv", rows(3, 4)) // not looked at before the rotation
		if err := os.Rename(filepath.Join(y.dir, "log.csv"), filepath.Join(y.dir, "log.csv.1")); err != nil {
			t.Fatal(err)
		}
		y.append("log.csv", "t,a\n"+rows(5, 6))
		if !kept {
			y.restart()
		}
		y.look()
		y.append("log.csv", rows(7, 7))
		y.look()
		y.expect(7)
	}
}

func TestRotationWithinThePattern(t *testing.T) {
	y := newYard(t, "log*")
	y.append("log", "t,a\n"+rows(1, 2))
	y.look()
	y.append("log", rows(3, 3))
	if err := os.Rename(filepath.Join(y.dir, "log"), filepath.Join(y.dir, "log.1")); err != nil {
		t.Fatal(err)
	}
	y.append("log", "t,a\n"+rows(4, 4))
	y.look()
	y.restart()
	y.append("log", rows(5, 5))
	y.look()
	y.expect(5)
}

func TestTruncationAndDeletion(t *testing.T) {
	y := newYard(t, "log.csv")
	y.append("log.csv", "t,a\n"+rows(1, 3))
	y.look()
	if err := os.Truncate(filepath.Join(y.dir, "log.csv"), 0); err != nil { // copied away and truncated
		t.Fatal(err)
	}
	y.append("log.csv", "t,a\n"+rows(4, 9)) // longer than before already
	y.look()
	y.expect(9)
	y.append("log.csv", rows(10, 10))
	if err := os.Remove(filepath.Join(y.dir, "log.csv")); err != nil {
		t.Fatal(err)
	}
	y.look() // by the handle that is still open
	y.expect(10)
}

func TestAFolderWithFilesThatComeLate(t *testing.T) {
	y := newYard(t, "day-*.csv")
	y.append("day-2.csv", "t,a\n"+rows(3, 4))
	y.look()
	y.append("day-1.csv", "a,t\n") // other columns
	y.append("day-1.csv", "1,2026-06-20T00:00:00Z\n2,2026-06-20T00:00:01Z")
	y.look()
	if n := len(y.door.of("northmoor")); n != 3 {
		t.Fatalf("%d taken before the last line of the late file has its end", n)
	}
	old := time.Now().Add(-2 * restAfter)
	if err := os.Chtimes(filepath.Join(y.dir, "day-1.csv"), old, old); err != nil {
		t.Fatal(err)
	}
	y.look()
	y.expect(4)
}

func TestTheDoorSaysLater(t *testing.T) {
	y := newYard(t, "log.csv")
	y.append("log.csv", "t,a\n"+rows(1, 2))
	y.door.answer = func(string, []byte) (Answer, error) { return Answer{Retry: true, Reason: "journal_full"}, nil }
	ctx, cancel := context.WithTimeout(t.Context(), 50*time.Millisecond)
	defer cancel()
	if err := y.f.Look(ctx); err == nil {
		t.Error("it went on")
	}
	y.door.answer = nil
	y.restart()
	y.look()
	y.expect(2)
}

func TestWhatCannotBeReadIsKeptAndCounted(t *testing.T) {
	y := newYard(t, "*.csv")
	var kept []string
	y.f.s.Refuse = func(_ context.Context, station string, reason wire.Reason, detail string, count int, lines []byte) error {
		kept = append(kept, fmt.Sprintf("%s %s %d %q", station, reason, count, lines))
		return nil
	}
	y.append("a.csv", "t,a\nx,1\n"+rows(1, 1)+"y,2\n")
	y.append("b.csv", "time,a\n"+rows(2, 2)) // no column t
	y.append("c.csv", "t,a\n"+rows(2, 2))
	if err := y.f.Look(t.Context()); err == nil || !strings.Contains(err.Error(), `no column "t"`) {
		t.Error(err)
	}
	y.expect(2)
	if len(kept) != 1 || kept[0] != `northmoor bad_time 2 "x,1\ny,2\n"` || y.f.Wrong != 2 {
		t.Errorf("%q", kept)
	}
	// A damaged book of places is moved aside, and all is read again.
	if err := os.WriteFile(filepath.Join(y.dir, "places.json"), []byte{0, 0, 0}, 0o600); err != nil {
		t.Fatal(err)
	}
	y.restart()
	_ = y.f.Look(t.Context())
	if n := len(y.door.of("northmoor")); n != 4 {
		t.Errorf("%d taken", n)
	}
}

func FuzzFileLines(f *testing.F) {
	layouts := []*rules.FileLayout{
		layoutOf(f, `{path: x, time: [t], columns: {a: a, b: 3}}`),
		layoutOf(f, `{path: x, delimiter: space, header: false, time: [1, 2], time_format: "DD/MM/YY hh:mm", zone: UTC, columns: {a: 3}, missing: ["-9"]}`),
		layoutOf(f, `{path: x, delimiter: semicolon, decimal: comma, skip: 1, after_header: 1, time: [t], time_format: unix, columns: {a: a}}`),
	}
	f.Add(0, []byte("t,a,b\n2026-06-21T12:00:00Z,1,\"2\"\n"))
	f.Add(1, []byte("1/6/26 9:05 -9\n"))
	f.Add(2, []byte("x\nt;a\n;\n1782043200;1,5\n"))
	f.Fuzz(func(t *testing.T, which int, file []byte) {
		r := newLineReader(layouts[uint(which)%3])
		for _, line := range strings.Split(string(file), "\n") {
			reading, refusal, err := r.take([]byte(line))
			if err != nil {
				return
			}
			if reading != nil && refusal != nil {
				t.Fatal("both taken and refused")
			}
			if reading == nil {
				continue
			}
			// What is taken is a payload that the gate can read.
			var d wire.Decoder
			back, refused := d.Decode(wire.EncodeJSON(nil, append([]minute.Reading(nil), *reading)), nil)
			if len(refused) > 0 || len(back) != 1 || back[0].At != reading.At || len(back[0].Values) != len(reading.Values) {
				t.Fatalf("%q: %+v, %+v", line, reading, refused)
			}
		}
	})
}
