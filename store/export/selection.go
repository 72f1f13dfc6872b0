package export

import (
	"encoding/json"
	"fmt"
	"maps"
	"slices"
	"strings"
	"time"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/product"
	"fluxwarden/store/table"
)

// A Request says which rows to export.
type Request struct {
	Station    string
	Product    string   // of Products; empty is minutes
	From, To   int64    // minutes since 1970, To not included; a row counts by its start
	Quantities []string // nil is all that the station has; of raw the channels
}

// Products are what can be exported, by the folders of the archive.
var Products = []string{"minutes", "raw", "clean-minute", "clean-hour", "clean-day", "clean-month"}

// tableOf is the archive's table of a product.
func tableOf(name string) string { return strings.Replace(name, "clean-", "clean/", 1) }

// An UnknownError says that a word is none of those that can be asked for, and which was most likely meant.
type UnknownError struct {
	What, Word string
	Known      []string
}

func (e *UnknownError) Error() string {
	if near, ok := rules.Nearest(e.Word, e.Known); ok {
		return fmt.Sprintf("%s %q: there is none; did you mean %s?", e.What, e.Word, near)
	}
	return fmt.Sprintf("%s %q: there is none; there are %s", e.What, e.Word, strings.Join(e.Known, ", "))
}

// Check says what is wrong with the words of a request, apart from the archive.
func (r *Request) Check() error {
	if r.Product == "" {
		r.Product = "minutes"
	}
	if !slices.Contains(Products, r.Product) {
		return &UnknownError{"product", r.Product, Products}
	}
	if r.Product == "raw" {
		return nil // channels are the logger's
	}
	known := r.names()
	for _, q := range r.Quantities {
		if !slices.Contains(known, q) {
			return &UnknownError{"quantity", q, known}
		}
	}
	return nil
}

// names are what columns of the product are of.
func (r *Request) names() []string {
	if strings.HasPrefix(r.Product, "clean-") {
		return product.Names()
	}
	var list []string
	for q := rules.Quantity(0); int(q) < rules.QuantityCount; q++ {
		list = append(list, q.String())
	}
	return list
}

// ofQuantity gives what a column is of, empty for one that is of no quantity: the longest name that it is, or begins with.
func ofQuantity(column string, names []string) string {
	best := ""
	for _, n := range names {
		if rest, ok := strings.CutPrefix(column, n); ok && (rest == "" || rest[0] == '_') && len(n) > len(best) {
			best = n
		}
	}
	return best
}

// columns are those of the product that the request wants; nil of raw, whose columns are the channels.
func (r *Request) columns() []table.Column {
	var all []table.Column
	switch r.Product {
	case "minutes":
		all = table.MinuteColumns()
	case "clean-minute":
		all = product.MinuteColumns()
	case "clean-hour":
		all = product.HourColumns()
	case "clean-day":
		all = product.DayColumns()
	case "clean-month":
		all = product.MonthColumns()
	default:
		return nil
	}
	if r.Quantities == nil {
		return all
	}
	names := r.names()
	var some []table.Column
	for _, c := range all {
		if q := ofQuantity(c.Name, names); q == "" || slices.Contains(r.Quantities, q) {
			some = append(some, c)
		}
	}
	return some
}

// each gives the rows asked for, a file at a time.
func (r *Request) each(a *store.Archive, columns []string, f func(*store.Rows) error) error {
	if r.Product == "raw" {
		return r.eachRaw(a, f)
	}
	return a.ReadProduct(r.Station, tableOf(r.Product), r.From, r.To, columns, f)
}

// eachRaw gives readings as a table a day at a time, with the channels asked for.
func (r *Request) eachRaw(a *store.Archive, f func(*store.Rows) error) error {
	return a.ReadRaw(r.Station, minute.FloorDiv(r.From, minute.PerDay), minute.FloorDiv(r.To-1, minute.PerDay), func(b *minute.Batch) error {
		t := table.FromBatch(b)
		times := t.Vectors[0].Times
		lo, _ := slices.BinarySearch(times, r.From*minute.MicrosPerMinute)
		hi, _ := slices.BinarySearch(times, r.To*minute.MicrosPerMinute)
		if lo >= hi {
			return nil
		}
		t = t.Cut(lo, hi)
		if r.Quantities != nil {
			t = t.Pick(func(c *table.Column) bool {
				name, _, _ := strings.Cut(c.Name, ":")
				return name == "time" || name == "received" || name == "ahead" || slices.Contains(r.Quantities, name)
			})
		}
		return f(&store.Rows{Station: r.Station, Table: t})
	})
}

// A survey is what the rows asked for hold: how many there are, which columns have a value, which texts.
type survey struct {
	rows    int
	columns []table.Column // with a value somewhere; time is first
	texts   map[string][]string
	meta    map[string]string
}

// look surveys the rows, so that a file can be written that has the columns with values only.
func (r *Request) look(a *store.Archive) (*survey, error) {
	s := &survey{texts: map[string][]string{}, meta: map[string]string{}}
	wanted := r.columns()
	var names []string
	for _, c := range wanted {
		names = append(names, c.Name)
	}
	used := map[string]bool{}
	var found []table.Column
	err := r.each(a, names, func(rs *store.Rows) error {
		s.rows += rs.Rows
		for i := range rs.Columns {
			c, v := &rs.Columns[i], &rs.Vectors[i]
			s.collect(c, v)
			if !used[c.Name] && hasValue(v) {
				used[c.Name] = true
				found = append(found, *c)
			}
		}
		mergeMeta(s.meta, rs.Meta)
		return nil
	})
	if err != nil {
		return nil, err
	}
	if s.rows == 0 {
		return nil, r.nothing(a)
	}
	if wanted == nil {
		if s.meta, err = a.NewestMeta(r.Station, tableOf(r.Product)); err != nil {
			return nil, err
		}
		described := table.Described(s.meta)
		for i := range found { // readings in memory do not know their units
			if k := slices.IndexFunc(described, func(c table.Column) bool { return c.Name == found[i].Name }); k >= 0 {
				found[i].Unit, found[i].Description = described[k].Unit, described[k].Description
			}
		}
		wanted = found
		slices.SortStableFunc(wanted, func(x, y table.Column) int { return strings.Compare(rawKey(x.Name), rawKey(y.Name)) })
		for _, q := range r.Quantities {
			if !used[q] {
				return nil, &UnknownError{"channel", q, channels(s.meta)}
			}
		}
	}
	for _, c := range wanted {
		if used[c.Name] {
			s.columns = append(s.columns, c)
		}
	}
	return s, nil
}

// channels lists the channels that a file of readings has, by its metadata.
func channels(meta map[string]string) (list []string) {
	for _, c := range table.Described(meta) {
		if rawKey(c.Name) >= "3" && !strings.Contains(c.Name, ":") {
			list = append(list, c.Name)
		}
	}
	return list
}

// rawKey sorts what every reading has before the channels.
func rawKey(name string) string {
	if i := slices.Index([]string{"time", "received", "ahead"}, name); i >= 0 {
		return fmt.Sprint(i)
	}
	return "3" + name
}

func (s *survey) collect(c *table.Column, v *table.Vector) {
	if v.Codes == nil {
		return
	}
	for code, text := range v.Dict {
		if !slices.Contains(s.texts[c.Name], text) && slices.Contains(v.Codes, int32(code)) {
			s.texts[c.Name] = append(s.texts[c.Name], text)
		}
	}
	slices.Sort(s.texts[c.Name])
}

func hasValue(v *table.Vector) bool {
	switch {
	case v.Times != nil:
		return slices.ContainsFunc(v.Times, func(x int64) bool { return x != table.NullTime })
	case v.Doubles != nil:
		return slices.ContainsFunc(v.Doubles, func(x float64) bool { return x == x })
	case v.Ints != nil:
		return slices.ContainsFunc(v.Ints, func(x int32) bool { return x != table.NullInt })
	case v.Codes != nil:
		return slices.ContainsFunc(v.Codes, func(x int32) bool { return x != table.NullCode })
	}
	return slices.Contains(v.Bools, true)
}

// nothing is the error of a range without rows: it says where there are some.
func (r *Request) nothing(a *store.Archive) error {
	first, last, err := a.Extent(r.Station, tableOf(r.Product))
	switch {
	case err != nil:
		return err
	case first == "" && strings.HasPrefix(r.Product, "clean-"):
		return fmt.Errorf("station %s: the archive has no %s of it: clean products are made when a day is sealed, and by rejudge for what is older", r.Station, r.Product)
	case first == "":
		return fmt.Errorf("station %s: the archive has no %s of it", r.Station, r.Product)
	}
	return fmt.Errorf("station %s: no %s rows in this range; the archive has them from %s to %s", r.Station, r.Product, first, last)
}

// listed are the metadata that differ from file to file and are all wanted; of the others the newest file's word holds.
var listed = []string{"rules_digest", "program", "judge_version", "product_version"}

func mergeMeta(to, from map[string]string) {
	for _, k := range slices.Sorted(maps.Keys(from)) {
		v := from[k]
		switch {
		case k == "calibrations":
			to[k] = mergeLists(to[k], v)
		case slices.Contains(listed, k) && to[k] != "" && v != "" && !slices.Contains(strings.Split(to[k], ", "), v):
			to[k] += ", " + v
		case slices.Contains(listed, k) && to[k] != "":
		default:
			to[k] = v
		}
	}
}

// mergeLists joins two JSON lists, what is in both once.
func mergeLists(a, b string) string {
	var x, y []json.RawMessage
	if json.Unmarshal([]byte(a), &x) != nil {
		return b
	}
	if json.Unmarshal([]byte(b), &y) != nil {
		return a
	}
	for _, e := range y {
		if !slices.ContainsFunc(x, func(o json.RawMessage) bool { return string(o) == string(e) }) {
			x = append(x, e)
		}
	}
	text, err := json.Marshal(x)
	if err != nil {
		return a
	}
	return string(text)
}

// about are the metadata that tell of the rows and not of one file of the archive.
func (s *survey) about() map[string]string {
	out := map[string]string{}
	for _, k := range []string{"station", "station_name", "network", "network_name", "contact", "licence", "citation", "latitude_deg", "longitude_deg", "elevation_m",
		"calibrations", "rules_digest", "program", "judge_version", "test_bits", "night_negatives", "gap_rules", "uncertainty_rules", "product_version", "format"} {
		if v := s.meta[k]; v != "" {
			out[k] = v
		}
	}
	return out
}

// lengthOf is how long a product's row is from its start, in microseconds; of raw there is none.
func lengthOf(name string, at int64) int64 {
	const hour = 60 * minute.MicrosPerMinute
	switch name {
	case "minutes", "clean-minute":
		return minute.MicrosPerMinute
	case "clean-hour":
		return hour
	case "clean-day":
		return 24 * hour
	case "clean-month":
		t := time.UnixMicro(at).UTC()
		return t.AddDate(0, 1, 0).Sub(t).Microseconds()
	}
	return 0
}
