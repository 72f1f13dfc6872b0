package console

import (
	"encoding/json"
	"fmt"
	"math"
	"net/http"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store/export"
)

// dayJSON gives the day's minutes in columns: what the read-out under the pointer shows.
func (c *Console) dayJSON(w http.ResponseWriter, r *http.Request) error {
	st, err := c.station(r)
	if err != nil {
		return err
	}
	day, err := parseDay(r.PathValue("day"))
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

// dayCSV gives the day's minutes as `export` does.
func (c *Console) dayCSV(w http.ResponseWriter, r *http.Request) error {
	st, err := c.station(r)
	if err != nil {
		return err
	}
	day, err := parseDay(r.PathValue("day"))
	if err != nil {
		return err
	}
	s, err := readSpan(c.archive, st.ID, day*minute.PerDay, (day+1)*minute.PerDay, []string{"time"})
	if err != nil {
		return err
	}
	if s.rows == 0 {
		return c.noSuchDay(st, day)
	}
	w.Header().Set("Content-Type", "text/csv; charset=utf-8")
	w.Header().Set("Content-Disposition", fmt.Sprintf("attachment; filename=\"%s_%s.csv\"", st.ID, dayName(day)))
	_, err = c.archive.csv(w, export.Request{Station: st.ID, From: day * minute.PerDay, To: (day + 1) * minute.PerDay})
	return err
}
