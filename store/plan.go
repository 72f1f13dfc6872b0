package store

import (
	"bytes"
	"cmp"
	"encoding/json"
	"fmt"
	"slices"
	"strconv"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/minute"
	"fluxwarden/store/table"
)

// rawPartsMax is how many part files of one station-day are kept before a commit writes them as one.
const rawPartsMax = 16

func (d *draft) meta(f *File, digests map[string]string) (map[string]string, error) {
	site, err := d.site()
	if err != nil {
		return nil, err
	}
	m := provenance(site, f.Station, f.Period)
	for k, v := range map[string]string{"station": f.Station, "table": f.Table, "period": f.Period, "sealed": strconv.FormatBool(f.Sealed),
		"format": strconv.Itoa(FormatVersion), "partition": strconv.Itoa(d.c.Partition), "commit": strconv.FormatUint(d.number, 10),
		"program": d.c.Program, "rules_digest": d.c.RulesDigest} {
		m[k] = v
	}
	// When a file was written stands in the commit record: the same rows give the same bytes.
	if f.Table == TableRaw {
		return m, nil
	}
	m["judge_version"] = strconv.Itoa(engine.JudgeVersion)
	if digests != nil {
		b, _ := json.Marshal(digests)
		m["row_digests"] = string(b)
	}
	if f.Table == TableMinutes {
		for k, v := range d.c.Meta {
			m[k] = v
		}
		m["test_bits"] = table.TestBits()
	}
	return m, nil
}

func (d *draft) add(f File, makeFile func(f File) ([]byte, File, error)) {
	d.jobs = append(d.jobs, &job{file: f, make: func() ([]byte, File, error) { return makeFile(f) }})
}

func (d *draft) planRaw() error {
	for _, r := range d.c.Raw {
		if d.fresh == nil {
			d.fresh = map[rawDay]bool{}
		}
		d.fresh[rawDay{r.Batch.Station, r.Day}] = true
	}
	type key struct {
		station string
		day     int64
	}
	parts := map[key][]*table.Table{}
	var order []key
	for _, r := range d.c.Raw {
		if err := checkStation(r.Batch.Station); err != nil {
			return err
		}
		for _, at := range r.Batch.At {
			if at.Day() != r.Day {
				return fmt.Errorf("raw of %s: a stamp of %s in the part of %s", r.Batch.Station, dayName(at.Day()), dayName(r.Day))
			}
		}
		if r.Batch.Rows() == 0 {
			continue
		}
		k := key{r.Batch.Station, r.Day}
		if parts[k] == nil {
			order = append(order, k)
		}
		parts[k] = append(parts[k], table.FromBatch(r.Batch))
	}
	for _, k := range order {
		var old []File
		for _, f := range d.current(k.station, TableRaw) {
			if f.Period == dayName(k.day) {
				old = append(old, f)
			}
		}
		if len(old) < rawPartsMax {
			old = nil
		}
		for _, f := range old {
			d.replace(f)
		}
		d.add(File{Table: TableRaw, Station: k.station, Period: dayName(k.day)}, func(f File) ([]byte, File, error) {
			return d.makeRaw(f, old, parts[k])
		})
	}
	return nil
}

func (d *draft) makeRaw(f File, old []File, fresh []*table.Table) ([]byte, File, error) {
	var tables []*table.Table
	for _, o := range old {
		t, err := d.a.readFile(o, nil)
		if err != nil {
			return nil, f, err
		}
		tables = append(tables, t)
	}
	return d.encodeRaw(f, joinRaw(append(tables, fresh...)))
}

func (d *draft) encodeRaw(f File, t *table.Table) ([]byte, File, error) {
	f.Rows = t.Rows
	site, err := d.site()
	if err != nil {
		return nil, f, err
	}
	t.Columns = withUnits(t.Columns, site, f.Station)
	if t.Meta, err = d.meta(&f, nil); err != nil {
		return nil, f, err
	}
	data, err := table.Encode(t)
	return data, f, err
}

// joinRaw puts readings together, sorted by time; of equal stamps the one that came first stays first.
func joinRaw(tables []*table.Table) *table.Table {
	if len(tables) == 1 {
		return tables[0]
	}
	parts := make([]table.Part, len(tables))
	for i, t := range tables {
		parts[i] = table.Part{Table: t, To: t.Rows}
	}
	t := table.Join(table.Union(tables), parts)
	if times := t.Find("time").Times; !slices.IsSorted(times) {
		return table.FromBatch(table.ToBatch("", t))
	}
	return t
}

func (d *draft) planDays() error {
	for _, r := range d.c.DayReasons {
		if d.reasons == nil {
			d.reasons = map[rawDay]string{}
		}
		d.reasons[rawDay{r.Station, r.Day}] = r.Reason
	}
	days := slices.Clone(d.c.Days)
	slices.SortStableFunc(days, func(x, y Day) int {
		return cmp.Or(cmp.Compare(x.Judged.Station, y.Judged.Station), cmp.Compare(x.Judged.Day, y.Judged.Day))
	})
	var month *Month // being changed; its days come one after the other
	for i, day := range days {
		j := day.Judged
		if err := checkStation(j.Station); err != nil {
			return err
		}
		if i > 0 && days[i-1].Judged.Station == j.Station && days[i-1].Judged.Day == j.Day {
			return fmt.Errorf("day %s of %s: twice in one commit", dayName(j.Day), j.Station)
		}
		if slices.ContainsFunc(d.c.Months, func(m *Month) bool { return m.Station == j.Station && m.Month == monthOf(j.Day) }) {
			return fmt.Errorf("day %s of %s: its month is in the same commit; add it there", dayName(j.Day), j.Station)
		}
		if d.monthFile(j.Station, monthOf(j.Day)) == nil {
			d.planDay(day)
			continue
		}
		// The month is one file already. Its other days stay, so it is written anew with this day changed.
		if month == nil || month.Station != j.Station || month.Month != monthOf(j.Day) {
			month = NewMonth(j.Station, monthOf(j.Day))
			d.addMonth(month)
		}
		if err := month.Add(j); err != nil {
			return err
		}
	}
	return nil
}

func (d *draft) planDay(day Day) {
	j := day.Judged
	var old []File
	for _, f := range d.current(j.Station, TableMinutes) {
		if f.Period == dayName(j.Day) {
			old = append(old, f)
			d.replace(f)
		}
	}
	t := table.FromJudged(j)
	d.add(File{Table: TableMinutes, Station: j.Station, Period: dayName(j.Day), Sealed: day.Sealed}, func(f File) ([]byte, File, error) {
		return d.makeMinutes(f, t, []monthDay{{day: j.Day, to: t.Rows}}, old)
	})
}

func (d *draft) monthFile(station, month string) *File {
	for _, f := range d.current(station, TableMinutes) {
		if f.Period == month {
			return &f
		}
	}
	return nil
}

// makeMinutes writes the rows in place of the old files'.
func (d *draft) makeMinutes(f File, t *table.Table, days []monthDay, old []File) ([]byte, File, error) {
	f.Digests = map[string]string{}
	for i := range days {
		f.Digests[dayName(days[i].day)] = days[i].digestOf(t)
	}
	f.Rows = t.Rows
	var err error
	if t.Meta, err = d.meta(&f, f.Digests); err != nil {
		return nil, f, err
	}
	if err := d.dateDays(&f, t.Meta, old); err != nil {
		return nil, f, err
	}
	if err := d.makeProducts(&f, t); err != nil {
		return nil, f, err
	}
	w := minuteWriters.Get().(*table.Writer)
	var b bytes.Buffer
	if err := w.Write(&b, t); err != nil {
		return nil, f, err // the writer is not put back: its state is not known
	}
	minuteWriters.Put(w)
	return b.Bytes(), f, nil
}

func (d *draft) planMonths() error {
	for _, m := range d.c.Months {
		if err := checkStation(m.Station); err != nil {
			return err
		}
		d.addMonth(m)
	}
	return nil
}

// addMonth makes the month's file of the days in m and those in the archive that m does not have.
func (d *draft) addMonth(m *Month) {
	var old []File
	for _, f := range d.current(m.Station, TableMinutes) {
		if len(f.Period) >= 7 && f.Period[:7] == m.Month {
			old = append(old, f)
			d.replace(f)
		}
	}
	d.add(File{Table: TableMinutes, Station: m.Station, Period: m.Month, Sealed: true}, func(f File) ([]byte, File, error) {
		t, days, err := d.a.mergeMonth(m, old)
		if err != nil {
			return nil, f, err
		}
		return d.makeMinutes(f, t, days, old)
	})
}

func (a *Archive) mergeMonth(m *Month, old []File) (*table.Table, []monthDay, error) {
	type source struct {
		day  int64
		part table.Part
	}
	var list []source
	have := map[int64]bool{}
	for _, x := range m.days {
		have[x.day] = true
		list = append(list, source{x.day, table.Part{Table: m.rows, From: x.from, To: x.to}})
	}
	fresh := len(list)
	for _, f := range old {
		kept, err := a.keepsOther(f, m)
		if err != nil {
			return nil, nil, err
		}
		if !kept {
			continue // all its days are in m
		}
		t, err := a.readFile(f, nil)
		if err != nil {
			return nil, nil, err
		}
		for _, x := range daysOf(t) {
			if !have[x.day] {
				list = append(list, source{x.day, table.Part{Table: t, From: x.from, To: x.to}})
			}
		}
	}
	if fresh == len(list) {
		return m.rows.Cut(0, m.used), m.days, nil
	}
	slices.SortStableFunc(list, func(x, y source) int { return int(x.day - y.day) })
	parts, days, at := make([]table.Part, len(list)), make([]monthDay, len(list)), 0
	for i, s := range list {
		parts[i] = s.part
		days[i] = monthDay{day: s.day, from: at, to: at + s.part.To - s.part.From}
		at = days[i].to
	}
	return table.Join(table.MinuteColumns(), parts), days, nil
}

// keepsOther says whether a file has days that the month has not.
func (a *Archive) keepsOther(f File, m *Month) (bool, error) {
	digests, err := a.digests(f)
	for _, x := range m.days {
		delete(digests, dayName(x.day))
	}
	return len(digests) > 0, err
}

// daysOf finds the days in rows sorted by time.
func daysOf(t *table.Table) []monthDay {
	var list []monthDay
	v := t.Find("time")
	if v == nil {
		return nil
	}
	for r, x := range v.Times {
		day := minute.Stamp(x).Day()
		if n := len(list); n == 0 || list[n-1].day != day {
			list = append(list, monthDay{day: day, from: r, to: r})
		}
		list[len(list)-1].to = r + 1
	}
	return list
}

func (d *draft) planFaults() error {
	for _, s := range d.c.Faults {
		if err := checkStation(s.Station); err != nil {
			return err
		}
		for _, f := range d.current(s.Station, TableFaults) {
			d.replace(f)
		}
		t := table.FromEpisodes(s.Episodes)
		d.add(File{Table: TableFaults, Station: s.Station, Rows: t.Rows}, func(f File) ([]byte, File, error) {
			var err error
			if t.Meta, err = d.meta(&f, nil); err != nil {
				return nil, f, err
			}
			data, err := table.Encode(t)
			return data, f, err
		})
	}
	return nil
}
