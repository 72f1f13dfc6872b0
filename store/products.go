package store

import (
	"cmp"
	"encoding/json"
	"fmt"
	"slices"
	"strconv"
	"sync"

	"fluxwarden/qc/minute"
	"fluxwarden/store/product"
	"fluxwarden/store/table"
)

// A harvest is what comes of a commit's minutes beside their own files: the clean products. Jobs that run side by side add to it.
type harvest struct {
	mu      sync.Mutex
	files   []File // written
	removes []Removed
	sheaves []sheaf
}

// A sheaf is the means of the days and of the month of one file of minutes. They go into files of longer periods.
type sheaf struct {
	station, period string
	days, month     *table.Table
}

func isProduct(tableName string) bool { return productColumns(tableName) != nil }

func productColumns(tableName string) []table.Column {
	switch tableName {
	case TableCleanMinute:
		return product.MinuteColumns()
	case TableCleanHour:
		return product.HourColumns()
	case TableCleanDay:
		return product.DayColumns()
	case TableCleanMonth:
		return product.MonthColumns()
	}
	return nil
}

// productSpans cuts a product's rows into what has a digest each: days of minutes and hours, months of days, years of months.
func productSpans(tableName string, t *table.Table) []monthDay {
	days := daysOf(t)
	var label func(day int64) string
	switch tableName {
	case TableCleanDay:
		label = monthOf
	case TableCleanMonth:
		label = yearOf
	default:
		return days
	}
	var list []monthDay
	for _, x := range days {
		x.label = label(x.day)
		if n := len(list); n > 0 && list[n-1].label == x.label {
			list[n-1].to = x.to
			continue
		}
		list = append(list, x)
	}
	return list
}

func productDigest(tableName string) func(t *table.Table, from, to int) string {
	columns := productColumns(tableName)
	return func(t *table.Table, from, to int) string { return table.DigestOf(columns, t, from, to) }
}

// The metadata of clean/minute and clean/hour that say of which rows of minutes and by which settings they were made.
const (
	metaMadeFrom = "made_from"
	metaMadeBy   = "made_by"
)

// madeBy names what the products depend on beside the rows of minutes.
func madeBy(s product.Settings) string {
	return fmt.Sprintf("products %d, night_negatives %s", product.Version, nightNegatives(s))
}

func nightNegatives(s product.Settings) string {
	if s.NightZero {
		return "zero"
	}
	return "keep"
}

// shortDigest is enough of a digest to tell revisions of a day apart.
func shortDigest(digest string) string { return digest[:min(len(digest), 16)] }

func madeFrom(digests map[string]string) string {
	short := map[string]string{}
	for day, digest := range digests {
		short[day] = shortDigest(digest)
	}
	b, _ := json.Marshal(short)
	return string(b)
}

// makeProducts makes the products of a file of minutes that is sealed, or of which there were products before, in the place of those that
// there are of its period.
func (d *draft) makeProducts(f *File, t *table.Table) error {
	if f.Table != TableMinutes || t.Rows == 0 {
		return nil
	}
	old := d.productsOf(f)
	if !f.Sealed && len(old) == 0 {
		return nil
	}
	site, err := d.site()
	if err != nil {
		return err
	}
	settings := settingsOf(site, f.Station)
	p := product.Make(t, settings, isMonth(f.Period))
	var files []File
	for _, x := range []struct {
		name string
		t    *table.Table
	}{{TableCleanMinute, p.Minutes}, {TableCleanHour, p.Hours}} {
		file := File{Table: x.name, Station: f.Station, Period: f.Period, Sealed: true}
		more := map[string]string{metaMadeFrom: madeFrom(f.Digests), metaMadeBy: madeBy(settings)}
		if err := d.writeProduct(&file, x.t, settings, more); err != nil {
			return fmt.Errorf("%s: %w", x.name, err)
		}
		files = append(files, file)
	}
	h := d.made
	h.mu.Lock()
	defer h.mu.Unlock()
	h.files = append(h.files, files...)
	for _, o := range old {
		h.removes = append(h.removes, Removed{Path: o.Path})
	}
	h.sheaves = append(h.sheaves, sheaf{f.Station, f.Period, p.Days, p.Month})
	return nil
}

// productsOf lists the files of minutes and hours that are made of minutes in the file's period.
func (d *draft) productsOf(f *File) []File {
	var list []File
	for _, name := range []string{TableCleanMinute, TableCleanHour} {
		for _, o := range d.current(f.Station, name) {
			if o.Period == f.Period || isMonth(f.Period) && len(o.Period) > len(f.Period) && o.Period[:len(f.Period)] == f.Period {
				list = append(list, o)
			}
		}
	}
	return list
}

func (d *draft) writeProduct(f *File, t *table.Table, s product.Settings, more map[string]string) error {
	f.Rows, f.Digests = t.Rows, map[string]string{}
	digest := productDigest(f.Table)
	for _, x := range productSpans(f.Table, t) {
		f.Digests[x.name()] = digest(t, x.from, x.to)
	}
	meta, err := d.meta(f, f.Digests)
	if err != nil {
		return err
	}
	for k, v := range more {
		meta[k] = v
	}
	meta["product_version"] = strconv.Itoa(product.Version)
	meta["night_negatives"] = nightNegatives(s) + ": " + map[bool]string{false: "shortwave below zero at night is kept, all of it",
		true: "shortwave below zero is set to zero at night (zenith angle above 93 degrees), all of it"}[s.NightZero]
	meta["gap_rules"], meta["uncertainty_rules"] = product.GapRules, product.UncertaintyRules
	t.Meta = meta
	data, err := table.Encode(t)
	if err != nil {
		return err
	}
	return d.write(f, data)
}

// finishProducts writes the means of days and months into the files of their years and stations.
func (d *draft) finishProducts() error {
	h := d.made
	slices.SortStableFunc(h.sheaves, func(x, y sheaf) int {
		return cmp.Or(cmp.Compare(x.station, y.station), cmp.Compare(x.period, y.period))
	})
	for len(h.sheaves) > 0 {
		n := 1
		for n < len(h.sheaves) && h.sheaves[n].station == h.sheaves[0].station {
			n++
		}
		if err := d.bind(h.sheaves[:n]); err != nil {
			return fmt.Errorf("clean products of %s: %w", h.sheaves[0].station, err)
		}
		h.sheaves = h.sheaves[n:]
	}
	slices.SortFunc(h.files, func(x, y File) int { return cmp.Compare(x.Path, y.Path) })
	slices.SortFunc(h.removes, func(x, y Removed) int { return cmp.Compare(x.Path, y.Path) })
	return nil
}

// bind puts one station's means into their files.
func (d *draft) bind(sheaves []sheaf) error {
	station := sheaves[0].station
	var months []binding
	for len(sheaves) > 0 {
		year, n := sheaves[0].period[:4], 1
		for n < len(sheaves) && sheaves[n].period[:4] == year {
			n++
		}
		days := make([]binding, 0, n)
		for _, s := range sheaves[:n] {
			from, to, err := span(s.period)
			if err != nil {
				return err
			}
			days = append(days, binding{from, to, s.days})
		}
		if err := d.bindTable(TableCleanDay, station, year, days); err != nil {
			return err
		}
		for i, s := range sheaves[:n] {
			if s.month != nil {
				months = append(months, binding{days[i].from, days[i].to, s.month})
			}
		}
		sheaves = sheaves[n:]
	}
	if len(months) == 0 {
		return nil
	}
	return d.bindTable(TableCleanMonth, station, "", months)
}

// A binding is rows that take the place of all of the days from..to.
type binding struct {
	from, to int64
	t        *table.Table
}

// bindTable writes a file anew with rows in the place of others.
func (d *draft) bindTable(tableName, station, period string, fresh []binding) error {
	f := File{Table: tableName, Station: station, Period: period, Sealed: true}
	var old *table.Table
	for _, o := range d.current(station, tableName) {
		if o.Period != period {
			continue
		}
		var err error
		if old, err = d.a.readFile(o, nil); err != nil {
			return err
		}
		d.made.removes = append(d.made.removes, Removed{Path: o.Path})
	}
	site, err := d.site()
	if err != nil {
		return err
	}
	if err := d.writeProduct(&f, bound(productColumns(tableName), old, fresh), settingsOf(site, station), nil); err != nil {
		return err
	}
	d.made.files = append(d.made.files, f)
	return nil
}

// bound is old rows with fresh ones in their place, in order of time.
func bound(columns []table.Column, old *table.Table, fresh []binding) *table.Table {
	type run struct {
		at   int64
		part table.Part
	}
	var runs []run
	for _, b := range fresh {
		runs = append(runs, run{b.from, table.Part{Table: b.t, To: b.t.Rows}})
	}
	if old != nil {
		for _, x := range daysOf(old) {
			if !slices.ContainsFunc(fresh, func(b binding) bool { return b.from <= x.day && x.day < b.to }) {
				runs = append(runs, run{x.day, table.Part{Table: old, From: x.from, To: x.to}})
			}
		}
	}
	slices.SortStableFunc(runs, func(x, y run) int { return cmp.Compare(x.at, y.at) })
	parts := make([]table.Part, len(runs))
	for i, r := range runs {
		parts[i] = r.part
	}
	return table.Join(columns, parts)
}

// productsStale says whether a file of minutes should have products that it has not: they were made of other rows, by other settings or by a
// program that knew none.
func (a *Archive) productsStale(p *partition, f File, by string) (bool, error) {
	if !f.Sealed || f.Rows == 0 {
		return false, nil
	}
	digests, err := a.digests(f)
	if err != nil {
		return false, err
	}
	want := madeFrom(digests)
	for _, name := range []string{TableCleanMinute, TableCleanHour} {
		files := p.current(f.Station, name)
		i := slices.IndexFunc(files, func(o File) bool { return o.Period == f.Period })
		if i < 0 {
			return true, nil
		}
		meta, err := a.metaOf(files[i])
		if err != nil {
			return false, err
		}
		if meta[metaMadeFrom] != want || meta[metaMadeBy] != by {
			return true, nil
		}
	}
	return false, nil
}

// productsOnly makes the products of a file of minutes that stays as it is.
func (d *draft) productsOnly(f File) {
	d.jobs = append(d.jobs, &job{file: File{Table: TableCleanMinute, Station: f.Station, Period: f.Period}, make: func() ([]byte, File, error) {
		t, err := d.a.readFile(f, nil)
		if err != nil {
			return nil, f, err
		}
		if f.Digests, err = d.a.digests(f); err != nil {
			return nil, f, err
		}
		return nil, f, d.makeProducts(&f, t)
	}})
}

// ReadProduct gives the rows of a table of minutes or of a clean product from one minute to another, the second not included, in order and a
// file at a time. A row counts by its start. Only the columns named are read, and always `time`, which comes first; nil is all.
func (a *Archive) ReadProduct(station, tableName string, fromMinute, toMinute int64, columns []string, each func(*Rows) error) error {
	if tableName != TableMinutes && !isProduct(tableName) {
		return fmt.Errorf("product %q: the archive has %s and clean products", tableName, TableMinutes)
	}
	if columns != nil && !slices.Contains(columns, "time") {
		columns = append([]string{"time"}, columns...)
	}
	const farthest = int64(1) << 36 // in microseconds it still fits
	next := max(fromMinute, -farthest)
	toMinute = min(toMinute, farthest)
	return a.retry(station, func(p *partition) error {
		for _, f := range p.current(station, tableName) {
			if f.Period != "" {
				from, to, err := span(f.Period)
				if err != nil {
					return err
				}
				if to*minute.PerDay <= next || from*minute.PerDay >= toMinute {
					continue
				}
			}
			t, err := a.readFile(f, columns)
			if err != nil {
				return err
			}
			times := t.Find("time")
			if times == nil || times.Times == nil {
				continue
			}
			lo, _ := slices.BinarySearch(times.Times, next*minute.MicrosPerMinute)
			hi, _ := slices.BinarySearch(times.Times, toMinute*minute.MicrosPerMinute)
			if lo >= hi {
				continue
			}
			last := minute.Stamp(times.Times[hi-1]).Minute()
			if err := each(&Rows{station, t.Cut(lo, hi)}); err != nil {
				return err
			}
			next = last + 1
		}
		return nil
	})
}

// ProductDigest gives the digest that a product's rows of a day (of minutes and hours), a month (of days) or a year (of months) were committed with,
// empty if they are not there.
func (a *Archive) ProductDigest(station, tableName, period string) (digest string, err error) {
	err = a.retry(station, func(p *partition) error {
		digest = ""
		for _, f := range p.current(station, tableName) {
			if f.Period != "" && !(len(period) >= len(f.Period) && period[:len(f.Period)] == f.Period) {
				continue
			}
			d, err := a.digests(f)
			if err != nil {
				return err
			}
			if d[period] != "" {
				digest = d[period]
				return nil
			}
		}
		return nil
	})
	return digest, err
}

// Extent gives the first and the last period that there are files of a table for, as dates; empty without any. What is not cut by time is
// looked into.
func (a *Archive) Extent(station, tableName string) (first, last string, err error) {
	err = a.retry(station, func(p *partition) error {
		first, last = "", ""
		for _, f := range p.current(station, tableName) {
			from, to := f.Period, f.Period
			if f.Period == "" {
				t, err := a.readFile(f, []string{"time"})
				if err != nil {
					return err
				}
				days := daysOf(t)
				if len(days) == 0 {
					continue
				}
				from, to = dayName(days[0].day), dayName(days[len(days)-1].day)
			}
			if first == "" || from < first {
				first = from
			}
			last = max(last, to)
		}
		return nil
	})
	return first, last, err
}

// NewestMeta gives the metadata of the last file of a table.
func (a *Archive) NewestMeta(station, tableName string) (meta map[string]string, err error) {
	err = a.retry(station, func(p *partition) error {
		files := p.current(station, tableName)
		if len(files) == 0 {
			meta = map[string]string{}
			return nil
		}
		meta, err = a.metaOf(files[len(files)-1])
		return err
	})
	return meta, err
}
