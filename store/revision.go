package store

import (
	"cmp"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"path"
	"slices"
	"strconv"
	"strings"

	"fluxwarden/rules"
	"fluxwarden/store/table"
)

// Reasons that the store gives where the writer gives none.
const (
	ReasonReadings = "more readings"
	ReasonRules    = "new rules"
)

// A Revision says by which commit a station-day's rows came about.
type Revision struct {
	Commit       uint64 `json:"-"`
	Digest       string `json:"-"` // of the rows
	RulesDigest  string `json:"rules"`
	Program      string `json:"program"`
	JudgeVersion int    `json:"judge"`
	Reason       string `json:"reason,omitempty"`
	Written      string `json:"-"` // RFC 3339; empty where the writer did not say or the record is no longer there
	Path         string `json:"-"` // of the file that holds it
	Superseded   bool   `json:"-"`
}

// The metadata that tell which commit each day of a file is of: `day_commits` for the days that are not of the file's own commit, and
// `commits` with what is known of these. `day_reasons` has the reasons of the days of the file's own.
const (
	metaDayCommits = "day_commits"
	metaCommits    = "commits"
	metaDayReasons = "day_reasons"
)

// isOwnMeta says whether a key is the store's own, and written anew with each file.
func isOwnMeta(key string) bool {
	return slices.Contains([]string{"columns", metaDayCommits, metaCommits, metaDayReasons}, key)
}

// revisionsOf gives the revisions that a file of minutes holds, by the day's name.
func revisionsOf(f File, meta map[string]string) (map[string]Revision, error) {
	digests := map[string]string{}
	if err := json.Unmarshal([]byte(meta["row_digests"]), &digests); err != nil {
		return nil, fmt.Errorf("%s: metadata row_digests: %w", f.Path, err)
	}
	dayCommits, commits, reasons := map[string]uint64{}, map[string]Revision{}, map[string]string{}
	for key, into := range map[string]any{metaDayCommits: &dayCommits, metaCommits: &commits, metaDayReasons: &reasons} {
		if text := meta[key]; text != "" {
			if err := json.Unmarshal([]byte(text), into); err != nil {
				return nil, fmt.Errorf("%s: metadata %s: %w", f.Path, key, err)
			}
		}
	}
	own := Revision{RulesDigest: meta["rules_digest"], Program: meta["program"]}
	own.Commit, _ = strconv.ParseUint(meta["commit"], 10, 64)
	own.JudgeVersion, _ = strconv.Atoi(meta["judge_version"])
	out := map[string]Revision{}
	for day, digest := range digests {
		r := own
		r.Reason = reasons[day]
		if n, ok := dayCommits[day]; ok {
			r = commits[strconv.FormatUint(n, 10)+" "+day]
			if r.Program == "" {
				r = commits[strconv.FormatUint(n, 10)]
			}
			r.Commit = n
		}
		r.Digest, r.Path = digest, f.Path
		out[day] = r
	}
	return out, nil
}

// dateDays writes into the metadata which commit each day is of: a day with the same rows as before stays of the commit that made them.
func (d *draft) dateDays(f *File, meta map[string]string, old []File) error {
	before := map[string]Revision{}
	sealed := map[string]bool{}
	for _, o := range old {
		m, err := d.a.metaOf(o)
		if err != nil {
			return err
		}
		list, err := revisionsOf(o, m)
		if err != nil {
			return err
		}
		for day, r := range list {
			before[day], sealed[day] = r, o.Sealed
		}
	}
	dayCommits, commits, reasons := map[string]uint64{}, map[string]Revision{}, map[string]string{}
	for day, digest := range f.Digests {
		was, had := before[day]
		switch {
		case had && was.Digest == digest:
			dayCommits[day] = was.Commit
			key := strconv.FormatUint(was.Commit, 10)
			if other, ok := commits[key]; ok && other != strip(was) {
				key += " " + day
			}
			commits[key] = strip(was)
		case d.c.Reason != "":
			reasons[day] = d.c.Reason
		case had && sealed[day] || d.c.RulesDigest != was.RulesDigest && had:
			if reason := d.seenReason(f.Station, day, &was); reason != "" {
				reasons[day] = reason
			}
		}
	}
	for key, value := range map[string]any{metaDayCommits: dayCommits, metaCommits: commits, metaDayReasons: reasons} {
		if b, err := json.Marshal(value); err == nil && string(b) != "{}" {
			meta[key] = string(b)
		}
	}
	return nil
}

// strip leaves what is the same for all days of a commit, or nearly so.
func strip(r Revision) Revision {
	r.Commit, r.Digest, r.Written, r.Path, r.Superseded = 0, "", "", "", false
	return r
}

// lookBack is how many days before a day new readings may change it by what the judge learns from them, and hindsight after it.
const lookBack, lookAhead = 30, 10

// seenReason is why a day changes, as far as the commit itself shows.
func (d *draft) seenReason(station, day string, was *Revision) string {
	n, _, err := span(day)
	if err != nil {
		return ""
	}
	if reason := d.reasons[rawDay{station, n}]; reason != "" {
		return reason
	}
	for k := n - lookBack; k <= n+lookAhead; k++ {
		if d.fresh[rawDay{station, k}] {
			return ReasonReadings
		}
	}
	if was.RulesDigest != d.c.RulesDigest {
		return ReasonRules
	}
	return ""
}

// planRevisions replaces days in the files that they are in.
func (d *draft) planRevisions() error {
	for _, m := range d.c.Revisions {
		if err := checkStation(m.Station); err != nil {
			return err
		}
		files := ofMonth(d.current(m.Station, TableMinutes), m.Month)
		if whole := d.monthFile(m.Station, m.Month); whole != nil || len(files) == 0 {
			same, err := d.sameRows(m, whole)
			switch {
			case err != nil:
				return err
			case same:
				d.productsOnly(*whole)
			default:
				d.addMonth(m)
			}
			continue
		}
		for i := range m.days {
			if err := d.reviseDay(m, &m.days[i], files); err != nil {
				return err
			}
		}
	}
	return nil
}

// sameRows says whether a file has the rows of all days of a month as they are.
func (d *draft) sameRows(m *Month, f *File) (bool, error) {
	if f == nil {
		return false, nil
	}
	digests, err := d.a.digests(*f)
	for i := range m.days {
		if digests[dayName(m.days[i].day)] != m.days[i].digestOf(m.rows) {
			return false, err
		}
	}
	return true, err
}

// reviseDay writes one day that has a file of its own, or none yet, if its rows are others.
func (d *draft) reviseDay(m *Month, x *monthDay, files []File) error {
	day := dayName(x.day)
	f := File{Table: TableMinutes, Station: m.Station, Period: day, Sealed: true}
	var old []File
	for _, o := range files {
		if o.Period != day {
			continue
		}
		digests, err := d.a.digests(o)
		if err != nil {
			return err
		}
		if digests[day] == x.digestOf(m.rows) {
			if stale, err := d.stale(o); err != nil || !stale {
				return err
			}
			d.productsOnly(o)
			return nil
		}
		f.Sealed = o.Sealed
		old = append(old, o)
	}
	for _, o := range old {
		d.replace(o)
	}
	t := m.rows.Cut(x.from, x.to)
	d.add(f, func(f File) ([]byte, File, error) {
		return d.makeMinutes(f, t, []monthDay{{day: x.day, to: t.Rows, digest: x.digest}}, old)
	})
	return nil
}

// stale is productsStale by the settings of the commit's rules.
func (d *draft) stale(f File) (bool, error) {
	site, err := d.site()
	if err != nil {
		return false, err
	}
	return d.a.productsStale(d.p, f, madeBy(settingsOf(site, f.Station)))
}

// Revisions gives the revisions of a station-day that the archive still has, the oldest first. Rows that changed before the day was
// sealed left none.
func (a *Archive) Revisions(station string, day int64) ([]Revision, error) {
	var list []Revision
	err := a.retry(station, func(p *partition) error {
		list = nil
		current := ofMonth(p.current(station, TableMinutes), monthOf(day))
		old, err := a.supersededOf(station, monthOf(day))
		if err != nil {
			return err
		}
		for i, f := range slices.Concat(old, current) {
			if !isMonth(f.Period) && f.Period != dayName(day) {
				continue
			}
			meta, err := a.metaOf(f)
			if err != nil {
				return err
			}
			of, err := revisionsOf(f, meta)
			if err != nil {
				return err
			}
			if r, ok := of[dayName(day)]; ok {
				r.Superseded = i < len(old)
				list = append(list, r)
			}
		}
		return nil
	})
	slices.SortStableFunc(list, func(x, y Revision) int { return cmp.Compare(x.Commit, y.Commit) })
	a.dateRevisions(station, list)
	// A month that was written again for another day's sake holds the same revision of this one; the current file is the one to name.
	out := list[:0]
	for _, r := range list {
		if n := len(out); n > 0 && out[n-1].Commit == r.Commit && out[n-1].Digest == r.Digest {
			out[n-1] = r
			continue
		}
		out = append(out, r)
	}
	if i, ok := a.partitionOf(station); ok {
		for k := range out { // the record says when; a file does not, so that the same rows give the same bytes
			if r, _, e := a.readRecord(i, out[k].Commit); e == nil && out[k].Written == "" {
				out[k].Written = r.Time
			}
		}
	}
	return out, err
}

// dateRevisions says when revisions were written, where the records of then are still there.
func (a *Archive) dateRevisions(station string, list []Revision) {
	i, ok := a.partitionOf(station)
	for k := range list {
		if r, _, err := a.readRecord(i, list[k].Commit); ok && err == nil {
			list[k].Written = r.Time
		}
	}
}

// supersededOf lists the replaced files of minutes of a station's month.
func (a *Archive) supersededOf(station, month string) ([]File, error) {
	dir := path.Join("superseded", treeDir(TableMinutes, station, month))
	entries, err := a.fs.ReadDir(a.path(dir))
	if errors.Is(err, fs.ErrNotExist) {
		return nil, nil
	}
	if err != nil {
		return nil, err
	}
	var list []File
	for _, e := range entries {
		if e.Dir || !strings.HasSuffix(e.Name, ".parquet") {
			continue
		}
		period, _, ok := strings.Cut(strings.TrimPrefix(e.Name, station+"_"), "_")
		if !ok {
			continue
		}
		list = append(list, File{Path: path.Join(dir, e.Name), Table: TableMinutes, Station: station, Period: period, Sealed: true})
	}
	return list, nil
}

// RevisionRows reads the rows that a revision has of its day.
func (a *Archive) RevisionRows(r *Revision, station string, day int64) (*Rows, error) {
	t, err := a.readFile(File{Path: r.Path, Table: TableMinutes}, nil)
	if err != nil {
		return nil, err
	}
	for _, x := range daysOf(t) {
		if x.day == day {
			return &Rows{station, t.Cut(x.from, x.to)}, nil
		}
	}
	return nil, fmt.Errorf("%s: has no rows of %s", r.Path, dayName(day))
}

// A MonthChange is how judged days differ from those in the archive.
type MonthChange struct {
	Days       []int64 // whose rows differ, or that are new
	Quantities []table.Change
	Model      int      // minutes where what belongs to no quantity differs: sun, clear sky, records
	Products   bool     // clean products are to be made anew though no row differs: there are none, or they were made by other settings
	Rules      []string // digests of the rules by which the days that differ had been judged, sorted
}

// Compare holds the days of a month against the archive's, and the settings of its clean products against the site's. Where all digests are the
// same no row is read.
func (a *Archive) Compare(m *Month, site *rules.Site) (*MonthChange, error) {
	out := &MonthChange{}
	if _, ok := a.partitionOf(m.Station); !ok {
		for _, x := range m.days {
			out.Days = append(out.Days, x.day)
		}
		return out, nil
	}
	err := a.retry(m.Station, func(p *partition) error {
		*out = MonthChange{}
		where := map[string]File{}
		for _, f := range ofMonth(p.current(m.Station, TableMinutes), m.Month) {
			digests, err := a.digests(f)
			if err != nil {
				return err
			}
			for i := range m.days {
				day := dayName(m.days[i].day)
				if d, ok := digests[day]; ok && d != m.days[i].digestOf(m.rows) {
					where[day] = f
				} else if ok {
					where[day] = File{}
				}
			}
			if !out.Products {
				if out.Products, err = a.productsStale(p, f, madeBy(settingsOf(site, m.Station))); err != nil {
					return err
				}
			}
		}
		return a.compareDays(m, where, out)
	})
	return out, err
}

// compareDays compares the days that differ; where says in which file each is, no path for one that is the same.
func (a *Archive) compareDays(m *Month, where map[string]File, out *MonthChange) error {
	read := map[string]*table.Table{}
	by := map[string]map[string]Revision{}
	for _, x := range m.days {
		f, had := where[dayName(x.day)]
		if had && f.Path == "" {
			continue
		}
		out.Days = append(out.Days, x.day)
		if !had {
			continue // there is nothing to compare it with
		}
		t := read[f.Path]
		if t == nil {
			var err error
			if t, err = a.readFile(f, nil); err != nil {
				return err
			}
			read[f.Path] = t
			if by[f.Path], err = revisionsOf(f, t.Meta); err != nil {
				return err
			}
		}
		if r := by[f.Path][dayName(x.day)].RulesDigest; !slices.Contains(out.Rules, r) {
			out.Rules = append(out.Rules, r)
			slices.Sort(out.Rules)
		}
		for _, o := range daysOf(t) {
			if o.day == x.day {
				changes, model := table.Compare(t.Cut(o.from, o.to), m.rows.Cut(x.from, x.to))
				out.Quantities, out.Model = table.SumChanges(out.Quantities, changes), out.Model+model
			}
		}
	}
	return nil
}
