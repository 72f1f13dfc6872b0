package console

import (
	"encoding/json"
	"fmt"
	"io"
	"math"
	"net/http"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/export"
)

// dayJSON gives the day's minutes in columns: what the read-out under the pointer shows.
func (c *Console) dayJSON(w http.ResponseWriter, r *http.Request) error {
	st, day, err := c.stationDay(r)
	if err != nil {
		return err
	}
	s, err := readSpan(c.archive, st.ID, day*minute.PerDay, (day+1)*minute.PerDay, dayColumns())
	if err != nil {
		return err
	}
	if s.rows == 0 {
		return c.noSuchDay(st, day)
	}
	type column struct {
		Name     string     `json:"name"`
		Unit     string     `json:"unit"`
		Values   []*float64 `json:"values"`
		Verdicts []string   `json:"verdicts"`
		Reasons  []string   `json:"reasons,omitempty"`
	}
	out := struct {
		Station string   `json:"station"`
		Day     string   `json:"day"`
		From    int64    `json:"from"` // minutes since 1970
		Columns []column `json:"columns"`
	}{Station: st.ID, Day: dayName(day), From: s.from}
	for _, q := range s.quantities(append(radiation(), weather()...)) {
		out.Columns = append(out.Columns, column{q.String(), q.Unit(), nullable(s.number(q.String())), s.words[q.String()+"_verdict"], s.words[q.String()+"_reasons"]})
	}
	for _, q := range []rules.Quantity{rules.Global, rules.Direct, rules.Diffuse, rules.LWDown} {
		if name := clearColumn(q); s.has(name) {
			out.Columns = append(out.Columns, column{Name: name, Unit: q.Unit(), Values: nullable(s.number(name))})
		}
	}
	writeJSON(w, out)
	return nil
}

// nullable makes null of what is not there; two decimals are more than any instrument resolves.
func nullable(x []float64) []*float64 {
	out := make([]*float64, len(x))
	for i, v := range x {
		if v == v {
			v = math.Round(v*100) / 100
			out[i] = &v
		}
	}
	return out
}

func writeJSON(w http.ResponseWriter, v any) {
	w.Header().Set("Content-Type", "application/json; charset=utf-8")
	w.Header().Set("Cache-Control", "no-cache")
	_ = json.NewEncoder(w).Encode(v) // into memory: it cannot fail for what we give it
}

// dayFiles are the forms in which a day is given, as `export` writes them.
var dayFiles = map[string]struct {
	kind  string
	write func(io.Writer, *store.Archive, export.Request) (int, error)
}{
	"minutes.csv":     {"text/csv; charset=utf-8", export.CSV},
	"minutes.nc":      {"application/x-netcdf", export.NetCDF},
	"minutes.parquet": {"application/vnd.apache.parquet", export.Parquet},
}

// dayFile gives the day's minutes as a file.
func (c *Console) dayFile(w http.ResponseWriter, r *http.Request) error {
	st, day, err := c.stationDay(r)
	if err != nil {
		return err
	}
	form, ok := dayFiles[r.PathValue("file")]
	if !ok {
		return notFound(fmt.Sprintf("a day is not given as %s", r.PathValue("file")), "There are minutes.csv, minutes.nc and minutes.parquet.")
	}
	s, err := readSpan(c.archive, st.ID, day*minute.PerDay, (day+1)*minute.PerDay, []string{"time"})
	if err != nil {
		return err
	}
	if s.rows == 0 {
		return c.noSuchDay(st, day)
	}
	w.Header().Set("Content-Type", form.kind)
	w.Header().Set("Content-Disposition", fmt.Sprintf("attachment; filename=\"%s_%s_%s\"", st.ID, dayName(day), r.PathValue("file")))
	request := export.Request{Station: st.ID, Product: "minutes", From: day * minute.PerDay, To: (day + 1) * minute.PerDay}
	return c.archive.of(st.ID, func(a *store.Archive) error { _, err := form.write(w, a, request); return err })
}
