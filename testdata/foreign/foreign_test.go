// Package foreign opens an archive with engines that are not ours, which need cgo: a module of its own, so that the program's tests do not.
package foreign

import (
	"context"
	"database/sql"
	"math"
	"math/rand/v2"
	"path/filepath"
	"strings"
	"testing"

	"github.com/apache/arrow-go/v18/arrow"
	"github.com/apache/arrow-go/v18/arrow/array"
	"github.com/apache/arrow-go/v18/arrow/memory"
	"github.com/apache/arrow-go/v18/parquet/file"
	"github.com/apache/arrow-go/v18/parquet/pqarrow"
	_ "github.com/duckdb/duckdb-go/v2"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

const day0 = int64(20_633) // 2026-06-29: the days of the archive reach into July

// made is an archive with day files and a month file, an open fault, and readings with and without statistics; and what is in it.
type made struct {
	dir            string
	minutes, nulls int
	sum            float64
	readings       int
}

func make3Days(t *testing.T) made {
	t.Helper()
	m := made{dir: filepath.Join(t.TempDir(), "archive")}
	a, err := store.OpenForWriting(vfs.OS{}, m.dir, store.Options{Owner: "test"})
	if err != nil {
		t.Fatal(err)
	}
	rng := rand.New(rand.NewPCG(1, 1))
	c := &store.Commit{Partition: 3, Program: "test"}
	for d := day0; d < day0+4; d++ {
		c.Days = append(c.Days, store.Day{Judged: m.judged(d, rng), Sealed: true})
		b := &minute.Batch{Station: "northmoor"}
		for k := range 10 {
			b.Append(&minute.Reading{At: minute.Stamp(d*minute.MicrosPerDay + int64(k)), Received: minute.Stamp(k % 2),
				Values: []minute.ChannelValue{{Channel: "g1_mv", Value: minute.Single(float64(k) / 7)},
					{Channel: "ta_c", Value: minute.Value{Mean: 1, SD: 0.5, Min: 0, Max: 2, N: 60}}}})
			m.readings++
		}
		c.Raw = append(c.Raw, store.RawPart{Day: d, Batch: b})
	}
	c.Faults = []store.StationFaults{{Station: "northmoor", Episodes: []fault.Episode{{ID: "x", Station: "northmoor", Instrument: "G1", Kind: rules.DomeWet,
		From: day0 * 1440, To: fault.Open, Raised: day0*1440 + 9, Confidence: 0.5}}}}
	if _, err := a.Commit(c); err != nil {
		t.Fatal(err)
	}
	if err := a.Compact(3, "northmoor", "2026-06"); err != nil { // June becomes one file, July stays day files
		t.Fatal(err)
	}
	if err := a.Close(); err != nil {
		t.Fatal(err)
	}
	return m
}

func (m *made) judged(day int64, rng *rand.Rand) *engine.Judged {
	const n = minute.PerDay
	column := func(f func(i int) float64) []float64 {
		out := make([]float64, n)
		for i := range out {
			out[i] = f(i)
		}
		return out
	}
	null := column(func(int) float64 { return math.NaN() })
	j := &engine.Judged{Station: "northmoor", Day: day, Rows: n, Records: make([]uint16, n),
		ZenithDeg: column(func(i int) float64 { return float64(i) / 16 }), ApparentZenithDeg: null, AzimuthDeg: null, ExtraterrestrialWm2: null,
		ClearGlobalWm2: null, ClearDirectWm2: null, ClearDiffuseWm2: null, ClearLWDownWm2: null}
	s := engine.Series{Instrument: "G1", Quantity: rules.Global, Primary: true, Measured: null, SD: null, Min: null, Max: null, U95: null,
		N: make([]uint32, n), Verdict: make([]rules.Verdict, n), Missed: make([]rules.TestSet, n), Passed: make([]rules.TestSet, n), Faults: make([]rules.FaultSet, n)}
	s.Value = column(func(i int) float64 {
		m.minutes++
		if rng.IntN(5) == 0 {
			m.nulls++
			return math.NaN()
		}
		s.Verdict[i] = rules.Accepted
		x := float64(rng.IntN(64_000)) / 64
		m.sum += x
		return x
	})
	s.Missed[7] = rules.Spike.Of() | rules.Closure.Of()
	j.Series = []engine.Series{s}
	return j
}

func TestDuckDBReadsTheTreeAsOneTable(t *testing.T) {
	m := make3Days(t)
	db, err := sql.Open("duckdb", "")
	if err != nil {
		t.Fatal(err)
	}
	defer db.Close()
	from := "read_parquet('" + m.dir + "/minutes/**/*.parquet', hive_partitioning = true, union_by_name = true)"
	var rows, times, values, accepted int
	var sum float64
	var station, kind string
	q := "SELECT count(*), count(DISTINCT time), count(global), sum(global), count(*) FILTER (global_verdict = 'accepted'), min(station), min(typeof(time)) FROM " + from
	if err := db.QueryRow(q).Scan(&rows, &times, &values, &sum, &accepted, &station, &kind); err != nil {
		t.Fatal(err)
	}
	want := m.minutes - m.nulls
	if rows != m.minutes || times != m.minutes || values != want || accepted != want || sum != m.sum || station != "northmoor" || kind != "TIMESTAMP WITH TIME ZONE" {
		t.Errorf("%d rows, %d times (%s), %d values, %d accepted, sum %v, station %s; want %d rows, %d values, sum %v", rows, times, kind, values, accepted, sum, station, m.minutes, want, m.sum)
	}
	var wrong, reasons int
	q = "SELECT count(*) FILTER (strftime(time AT TIME ZONE 'UTC', '%Y-%m') <> month), count(*) FILTER (global_reasons = 'spike;closure') FROM " + from
	if err := db.QueryRow(q).Scan(&wrong, &reasons); err != nil {
		t.Fatal(err)
	}
	if wrong != 0 || reasons != 4 {
		t.Errorf("%d rows under a wrong month, %d with the reasons", wrong, reasons)
	}
	var readings, received int
	var mean, sd float64
	if err := db.QueryRow(`SELECT count(*), count(received), sum(g1_mv), avg("ta_c:sd") FROM read_parquet('`+m.dir+`/raw/**/*.parquet', union_by_name = true)`).Scan(&readings, &received, &mean, &sd); err != nil {
		t.Fatal(err)
	}
	if readings != m.readings || received != m.readings/2 || math.Abs(mean-float64(m.readings/10)*45/7) > 1e-9 || sd != 0.5 {
		t.Errorf("%d readings, %d received, sum %v, sd %v", readings, received, mean, sd)
	}
	var open int
	if err := db.QueryRow(`SELECT count(*) FROM read_parquet('` + m.dir + `/faults/**/*.parquet') WHERE kind = 'dome_wet' AND "to" IS NULL`).Scan(&open); err != nil || open != 1 {
		t.Errorf("%d open faults, %v", open, err)
	}
	var unit string
	if err := db.QueryRow("SELECT decode(value) FROM parquet_kv_metadata('" + m.dir + "/minutes/**/*.parquet') WHERE decode(key) = 'columns' LIMIT 1").Scan(&unit); err != nil ||
		!strings.Contains(unit, `"standard_name":"surface_downwelling_shortwave_flux_in_air"`) {
		t.Errorf("metadata %.80q, %v", unit, err)
	}
}

// TestDuckDBReadsTheCleanProducts reads each product as one table over months and years, each period once.
func TestDuckDBReadsTheCleanProducts(t *testing.T) {
	m := make3Days(t)
	db, err := sql.Open("duckdb", "")
	if err != nil {
		t.Fatal(err)
	}
	defer db.Close()
	want := m.minutes - m.nulls
	for _, c := range []struct {
		product            string
		rows, values, lost int // lost is how many accepted minutes no row counts
	}{{"minute", m.minutes, want, 0}, {"hour", 4 * 24, -1, 0}, {"day", 4, -1, 0}, {"month", 1, 0, 2 * minute.PerDay}} {
		var rows, times, values, counted int
		var sum float64
		counts := "sum(global_n)"
		if c.product == "minute" {
			counts = "count(global)"
		}
		q := "SELECT count(*), count(DISTINCT time), count(global), coalesce(sum(global), 0), " + counts + " FROM read_parquet('" + m.dir + "/clean/" + c.product +
			"/**/*.parquet', hive_partitioning = true, union_by_name = true) WHERE station = 'northmoor'"
		if err := db.QueryRow(q).Scan(&rows, &times, &values, &sum, &counted); err != nil {
			t.Fatal(err)
		}
		if rows != c.rows || times != c.rows || c.values >= 0 && values != c.values {
			t.Errorf("%s: %d rows, %d times, %d values; want %d rows, %d values", c.product, rows, times, values, c.rows, c.values)
		}
		if c.product == "minute" && sum != m.sum {
			t.Errorf("minute: sum %v, want %v", sum, m.sum)
		}
		if c.lost == 0 && counted != want {
			t.Errorf("%s: stands on %d minutes, want %d", c.product, counted, want)
		}
	}
	var said int
	q := "SELECT count(*) FROM parquet_kv_metadata('" + m.dir + "/clean/**/*.parquet') WHERE decode(key) = 'gap_rules'"
	if err := db.QueryRow(q).Scan(&said); err != nil || said == 0 {
		t.Errorf("%d files say their gap rules, %v", said, err)
	}
}

func TestArrowReadsEveryFile(t *testing.T) {
	m := make3Days(t)
	rows, nulls, sum := 0, 0, 0.0
	for _, pattern := range []string{"minutes/*/*/*.parquet", "raw/*/*/*.parquet", "faults/*/*.parquet", "clean/*/*/*/*.parquet", "clean/month/*/*.parquet"} {
		files, err := filepath.Glob(filepath.Join(m.dir, pattern))
		if err != nil || len(files) == 0 {
			t.Fatalf("%s: %d files, %v", pattern, len(files), err)
		}
		for _, name := range files {
			table := readArrow(t, name)
			at := table.Schema().FieldIndices("global")
			if len(at) == 0 || strings.HasPrefix(pattern, "clean/") {
				continue
			}
			rows += int(table.NumRows())
			for _, c := range table.Column(at[0]).Data().Chunks() {
				nulls += c.NullN()
				values := c.(*array.Float64)
				for i := range values.Len() {
					if values.IsValid(i) {
						sum += values.Value(i)
					}
				}
			}
		}
	}
	if rows != m.minutes || nulls != m.nulls || sum != m.sum {
		t.Errorf("%d rows, %d nulls, sum %v; want %d, %d, %v", rows, nulls, sum, m.minutes, m.nulls, m.sum)
	}
}

func readArrow(t *testing.T, name string) arrow.Table {
	t.Helper()
	r, err := file.OpenParquetFile(name, false)
	if err != nil {
		t.Fatalf("%s: %v", name, err)
	}
	defer r.Close()
	ar, err := pqarrow.NewFileReader(r, pqarrow.ArrowReadProperties{}, memory.DefaultAllocator)
	if err != nil {
		t.Fatalf("%s: %v", name, err)
	}
	table, err := ar.ReadTable(context.Background())
	if err != nil {
		t.Fatalf("%s: %v", name, err)
	}
	return table
}
