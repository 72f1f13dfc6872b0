package store

import (
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"fmt"
	"path"
	"strings"
	"time"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store/table"
)

// Partitions is how many partitions an archive has. A partition has one owner at a time.
const Partitions = 64

// A Position says how far a partition has read a stream of the journal.
type Position struct {
	Stream  string `json:"stream"`
	Created int64  `json:"created"` // when the stream was made; a stream of the same name made anew counts from 1 again
	Seq     uint64 `json:"seq"`     // last one whose readings the archive holds
}

// A Commit is what a partition's owner wants in the archive, all or nothing.
type Commit struct {
	Partition   int
	Base        uint64 // number of the record it stands on, 0 for the first
	Epoch       uint64 // of the owner's lease
	Positions   []Position
	RulesDigest string
	Program     string            // name and version of the program
	Meta        map[string]string // goes into the metadata of the files of minutes: calibrations, licence, citation
	Reason      string            // why rows change, as history shows it; where it is empty the store says what it can see
	Time        time.Time         // when it is made, by the caller's clock; zero is not said
	Site        *rules.Site       // the rules in force, whose words go into the files; nil takes those that the archive keeps by RulesDigest

	Raw       []RawPart
	Days      []Day
	Months    []*Month
	Revisions []*Month // days that replace those in the archive, each in the file that it is in; days with the same rows are left alone
	Faults    []StationFaults
	Summaries []Summary
	Notes     []rules.Note // sealed by Note.Seal; added to those of their stations

	// DayReasons say why single days change; see Reason.
	DayReasons []DayReason
	// Owed are the days of the partition that are still to be judged once more when this commit is there; nil leaves what the record before says.
	Owed []Owed
}

// A RawPart is readings of one station whose stamps fall on one UTC day.
type RawPart struct {
	Day   int64
	Batch *minute.Batch
}

// A Day is a judged day: the latest revision of its rows. A sealed one that changes later goes to superseded/.
type Day struct {
	Judged *engine.Judged
	Sealed bool
}

// A DayReason is why a station-day's rows change, as history shows it.
type DayReason struct {
	Station string
	Day     int64
	Reason  string
}

// StationFaults are all episodes of a station.
type StationFaults struct {
	Station  string
	Episodes []fault.Episode
}

// A Summary is what the judge has to remember of a station-day, in its own form.
type Summary struct {
	Station string
	Day     int64
	JSON    []byte
}

// A Month is judged days of one station and month, gathered to be written as one file. Days already in the archive that are not
// among them are kept.
type Month struct {
	Station string
	Month   string // YYYY-MM
	rows    *table.Table
	used    int
	days    []monthDay
}

type monthDay struct {
	day      int64
	from, to int
	digest   string // empty until it is asked for
	label    string // of a span that is not a day
}

// name is what the digests call the span.
func (x *monthDay) name() string {
	if x.label != "" {
		return x.label
	}
	return dayName(x.day)
}

// digestOf gives the row digest of a day of the table.
func (x *monthDay) digestOf(t *table.Table) string {
	if x.digest == "" {
		x.digest = table.Digest(t, x.from, x.to)
	}
	return x.digest
}

// NewMonth makes a month without days.
func NewMonth(station, month string) *Month {
	return &Month{Station: station, Month: month, rows: table.NewMinutes(31 * minute.PerDay)}
}

// Add rounds a judged day into the month. Days come in order. The day may be reused afterwards.
func (m *Month) Add(j *engine.Judged) error {
	if j.Station != m.Station || monthOf(j.Day) != m.Month {
		return fmt.Errorf("month %s of %s: day %s of %s: does not belong to it", m.Month, m.Station, dayName(j.Day), j.Station)
	}
	if n := len(m.days); n > 0 && m.days[n-1].day >= j.Day {
		return fmt.Errorf("month %s of %s: day %s: not after the day before", m.Month, m.Station, dayName(j.Day))
	}
	table.Append(m.rows, j, m.used)
	m.days = append(m.days, monthDay{day: j.Day, from: m.used, to: m.used + j.Rows})
	m.used += j.Rows
	return nil
}

// Tables that files belong to.
const (
	TableRaw     = "raw"
	TableMinutes = "minutes"
	TableFaults  = "faults"
	TableState   = "state"
	// Clean products, by the folder that they are in.
	TableCleanMinute = "clean/minute"
	TableCleanHour   = "clean/hour"
	TableCleanDay    = "clean/day"
	TableCleanMonth  = "clean/month"
)

// tables are all of them.
var tables = []string{TableRaw, TableMinutes, TableFaults, TableState, TableCleanMinute, TableCleanHour, TableCleanDay, TableCleanMonth, TableNotes}

// A File is one file of the published tree.
type File struct {
	Path    string            `json:"path"` // in the archive
	Staged  string            `json:"staged,omitempty"`
	SHA256  string            `json:"sha256"`
	Bytes   int64             `json:"bytes"`
	Rows    int               `json:"rows"`
	Table   string            `json:"table"`
	Station string            `json:"station"`
	Period  string            `json:"period,omitempty"` // YYYY-MM-DD, YYYY-MM or YYYY; empty for faults and clean/month
	Sealed  bool              `json:"sealed,omitempty"`
	Digests map[string]string `json:"digests,omitempty"` // row digest by day; only in the record, the file's metadata has them too
}

// Removed is a file that a commit takes out of the published tree: to superseded/, or for good where To is empty.
type Removed struct {
	Path string `json:"path"`
	To   string `json:"to,omitempty"`
}

// A Record is a commit's record, commit/<partition>/<number>.json. Who creates it owns what it lists.
type Record struct {
	Partition   int        `json:"partition"`
	Number      uint64     `json:"number"`
	Epoch       uint64     `json:"epoch"`
	Positions   []Position `json:"positions"`
	RulesDigest string     `json:"rules"`
	Program     string     `json:"program"`
	Judge       int        `json:"judge,omitempty"`    // the judge's version
	Reason      string     `json:"reason,omitempty"`   // why rows change, where the writer said so
	Time        string     `json:"time,omitempty"`     // when it was made, RFC 3339, where the writer said so
	Previous    string     `json:"previous,omitempty"` // sha256 of the record before
	Files       []File     `json:"files"`
	Removes     []Removed  `json:"removes,omitempty"`
	Owed        []Owed     `json:"owed,omitempty"`
}

func (r *Record) encode() (data []byte, hash string) {
	data, err := json.MarshalIndent(r, "", " ")
	if err != nil {
		panic(err) // nothing in a record is without a JSON form
	}
	data = withCheck(append(data, '\n'), recordCheck, "\n}\n")
	return data, sha(data)
}

func sha(b []byte) string {
	s := sha256.Sum256(b)
	return hex.EncodeToString(s[:])
}

func dayTime(day int64) time.Time   { return time.Unix(day*86400, 0).UTC() }
func dayName(day int64) string      { return dayTime(day).Format("2006-01-02") }
func monthOf(day int64) string      { return dayTime(day).Format("2006-01") }
func yearOf(day int64) string       { return dayTime(day).Format("2006") }
func isYear(period string) bool     { return len(period) == len("2006") }
func isMonth(period string) bool    { return len(period) == len("2006-01") }
func partName(partition int) string { return fmt.Sprintf("%02d", partition) }

// span gives the days that a period covers, the second not included.
func span(period string) (from, to int64, err error) {
	if isYear(period) {
		t, err := time.Parse("2006", period)
		return t.Unix() / 86400, t.AddDate(1, 0, 0).Unix() / 86400, err
	}
	if isMonth(period) {
		t, err := time.Parse("2006-01", period)
		return t.Unix() / 86400, t.AddDate(0, 1, 0).Unix() / 86400, err
	}
	t, err := time.Parse("2006-01-02", period)
	return t.Unix() / 86400, t.Unix()/86400 + 1, err
}

func recordPath(partition int, number uint64) string {
	return path.Join("commit", partName(partition), fmt.Sprintf("%012d.json", number))
}

// treeDir is the directory of the published tree that a file belongs in. Day files and month files of one month share it, so that a
// glob over the tree meets one value of `month` for both.
func treeDir(tableName, station, period string) string {
	if period == "" {
		return path.Join(tableName, "station="+station)
	}
	if isYear(period) {
		return path.Join(tableName, "station="+station, "year="+period)
	}
	return path.Join(tableName, "station="+station, "month="+period[:7])
}

// checkStation refuses names that cannot stand in a path.
func checkStation(name string) error {
	if name == "" || name == "." || name == ".." || strings.ContainsAny(name, "/\\=\x00*?[]{}%") {
		return fmt.Errorf("station %q: cannot be part of a file name; use letters, digits, - and _", name)
	}
	return nil
}
