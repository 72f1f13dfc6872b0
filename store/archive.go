// Package store keeps the archive: readings as received, judged minutes and faults in Parquet, and the books that say which files
// count. Any engine reads the published tree without this program:
//
//	raw/station=S/month=YYYY-MM/…parquet       readings as received
//	minutes/station=S/month=YYYY-MM/…parquet   judged minutes; the columns are listed in store/table
//	faults/station=S/…parquet                  episodes
//	clean/minute/station=S/month=YYYY-MM/…     what was accepted, with the radiation budget; store/product says by which rules
//	clean/hour/station=S/month=YYYY-MM/…       its means
//	clean/day/station=S/year=YYYY/…  clean/month/station=S/…
//	state/station=S/month=YYYY-MM/…jsonl       day summaries
//	staging/ commit/ manifest/ superseded/ damaged/ rules/ archive.json   the archive's own books
//
// The design had `date=` partitions. They are `month=` here, because a month is compacted into one file: day files and month file live in
// one partition, and a glob never meets a partition value that is wrong for some of a file's rows. The day is in the name and in `time`.
//
// A commit is all or nothing: files are written whole under staging/ and synced, then one record is created exclusively, then the files are
// published. Publishing is redone when the archive is opened to write; readers look under staging/ for what is not yet published.
package store

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"path"
	"slices"
	"sync"

	"fluxwarden/store/table"
	"fluxwarden/store/vfs"
)

// FormatVersion is the version of the archive's books and tables. A program refuses an archive of a newer one, and raises that of an older one
// when it opens it to write: since version 2 there are clean products, which a program that does not know them would leave behind the rows.
const FormatVersion = 2

// ErrLostPartition says that another owner has made the record that this commit wanted to make. Nothing was changed; read the last record and
// begin anew from its positions, if the partition is still yours.
var ErrLostPartition = errors.New("the partition has another owner")

// An Archive is an open archive. Its methods may be called by several goroutines; commits of one partition go one after the other.
type Archive struct {
	fs     vfs.FS
	dir    string
	lock   io.Closer // nil if read only
	o      Options
	format int // of archive.json
	parts  [Partitions]*partition

	mu       sync.RWMutex
	stations map[string]int // to partition

	sites sites // rule sets that were read

	treeOnce sync.Once // the tree is walked once, and only if books are missing
	tree     []treeFile
	treeErr  error
}

// minuteWriters are kept for all archives: making one costs more than writing a day with it.
var minuteWriters = sync.Pool{New: func() any { return table.NewWriter(table.MinuteColumns()) }}

// Options of an archive that is written to.
type Options struct {
	Owner           string // written into the lock file: process id and what else tells the owner
	CheckpointEvery uint64 // records between checkpoints of the manifest; 0 is 256
}

type formatFile struct {
	Format int    `json:"format"`
	About  string `json:"about"`
}

// formatText is archive.json as the programs of a format version write it.
func formatText(version int) []byte {
	about := "archive of fluxwarden; the tree under raw/, minutes/, faults/ and clean/ is plain Parquet"
	if version < 2 {
		about = "archive of fluxwarden; the tree under raw/, minutes/ and faults/ is plain Parquet"
	}
	b, _ := json.Marshal(formatFile{version, about})
	return append(b, '\n')
}

// Open opens an archive to read; a writer may be at work meanwhile.
func Open(f vfs.FS, dir string) (*Archive, error) {
	a := newArchive(f, dir)
	if err := a.checkFormat(); err != nil {
		return nil, err
	}
	return a, a.load()
}

// OpenForWriting opens an archive to write, making it if it is not there. A second writer is refused with a *vfs.HeldError.
func OpenForWriting(f vfs.FS, dir string, o Options) (*Archive, error) {
	a := newArchive(f, dir)
	a.o = o
	if a.o.CheckpointEvery == 0 {
		a.o.CheckpointEvery = 256
	}
	if err := a.mkdir("."); err != nil {
		return nil, err
	}
	var err error
	if a.lock, err = f.Lock(a.path("lock"), o.Owner); err != nil {
		if held := (*vfs.HeldError)(nil); errors.As(err, &held) {
			return nil, fmt.Errorf("archive %s: %w; only one program may write to it", dir, err)
		}
		return nil, fmt.Errorf("archive %s: cannot be written to: %w", dir, err)
	}
	if err := a.begin(); err != nil {
		a.lock.Close()
		return nil, err
	}
	return a, nil
}

func (a *Archive) begin() error {
	err := a.checkFormat()
	if errors.Is(err, fs.ErrNotExist) || err == nil && a.format < FormatVersion {
		err = a.writeAtomic("archive.json", formatText(FormatVersion))
	}
	if err != nil {
		return err
	}
	if err := a.load(); err != nil {
		return err
	}
	for i := range a.parts {
		if err := a.recoverPartition(i); err != nil {
			return fmt.Errorf("archive %s: partition %02d: %w", a.dir, i, err)
		}
	}
	return nil
}

func newArchive(f vfs.FS, dir string) *Archive {
	a := &Archive{fs: f, dir: dir, stations: map[string]int{}}
	for i := range a.parts {
		a.parts[i] = newPartition()
	}
	return a
}

// Close gives the archive up to another writer, after writing the checkpoints that make the next opening quick.
func (a *Archive) Close() error {
	if a.lock == nil {
		return nil
	}
	var err error
	for i, p := range a.parts {
		p.mu.Lock()
		if p.have && p.checkpointed != p.last.Number {
			err = errors.Join(err, a.checkpoint(i, p))
		}
		p.mu.Unlock()
	}
	return errors.Join(err, a.lock.Close())
}

func (a *Archive) checkFormat() error {
	b, err := vfs.ReadFileBytes(a.fs, a.path("archive.json"))
	if err != nil {
		if errors.Is(err, fs.ErrNotExist) {
			return fmt.Errorf("archive %s: no archive.json there, so it is no archive of this program: %w", a.dir, err)
		}
		return err
	}
	var ff formatFile
	if err := json.Unmarshal(b, &ff); err != nil || ff.Format < 1 {
		return fmt.Errorf("archive %s: archive.json: damaged (%v); restore {\"format\": 1} into it", a.dir, err)
	}
	if ff.Format > FormatVersion {
		return fmt.Errorf("archive %s: format %d: this program knows up to %d; use a newer program", a.dir, ff.Format, FormatVersion)
	}
	a.format = ff.Format
	return nil
}

func (a *Archive) path(name string) string { return path.Join(a.dir, name) }

// mkdir makes a directory of the archive and those above it, durably.
func (a *Archive) mkdir(name string) error {
	full := a.path(name)
	if ok, err := vfs.Exists(a.fs, full); ok || err != nil {
		return err
	}
	var missing []string
	for d := full; ; d = path.Dir(d) {
		ok, err := vfs.Exists(a.fs, d)
		if err != nil {
			return err
		}
		if ok || d == path.Dir(d) {
			break
		}
		missing = append(missing, d)
	}
	slices.Reverse(missing)
	for _, d := range missing {
		if err := a.fs.Mkdir(d); err != nil && !errors.Is(err, fs.ErrExist) {
			return err
		}
		if err := a.fs.SyncDir(path.Dir(d)); err != nil {
			return err
		}
	}
	return nil
}

// writeSynced writes a whole file and syncs it; its name is durable only when its directory is synced.
func (a *Archive) writeSynced(name string, data []byte) error {
	f, err := a.fs.Create(a.path(name))
	if err != nil {
		return err
	}
	_, err = f.Write(data)
	if err == nil {
		err = f.Sync()
	}
	if e := f.Close(); err == nil {
		err = e
	}
	return err
}

// writeAtomic replaces a file as a whole, durably.
func (a *Archive) writeAtomic(name string, data []byte) error {
	if err := a.mkdir(path.Dir(name)); err != nil {
		return err
	}
	if err := a.writeSynced(name+".tmp", data); err != nil {
		return err
	}
	if err := a.fs.Rename(a.path(name+".tmp"), a.path(name)); err != nil {
		return err
	}
	return a.fs.SyncDir(path.Dir(a.path(name)))
}

// Stations lists the stations that the archive knows, sorted.
func (a *Archive) Stations() []string {
	a.mu.RLock()
	defer a.mu.RUnlock()
	list := make([]string, 0, len(a.stations))
	for s := range a.stations {
		list = append(list, s)
	}
	slices.Sort(list)
	return list
}

// Last gives the last record of a partition; ok is false if there is none.
func (a *Archive) Last(partition int) (r Record, ok bool, err error) {
	if partition < 0 || partition >= Partitions {
		return Record{}, false, fmt.Errorf("partition %d: there are %d, from 0 on", partition, Partitions)
	}
	p := a.parts[partition]
	p.mu.RLock()
	defer p.mu.RUnlock()
	return p.last, p.have, nil
}

// KeepRules keeps a rule set by its digest.
func (a *Archive) KeepRules(digest string, yaml []byte) error {
	if err := checkStation(digest); err != nil {
		return fmt.Errorf("rules digest %q: cannot be part of a file name", digest)
	}
	name := path.Join("rules", digest+".yaml")
	if ok, err := vfs.Exists(a.fs, a.path(name)); ok || err != nil {
		return err
	}
	if err := a.writeAtomic(name+".sha256", []byte(sumLine(name, yaml))); err != nil {
		return err
	}
	return a.writeAtomic(name, yaml)
}

// Rules gives a kept rule set back.
func (a *Archive) Rules(digest string) ([]byte, error) {
	return vfs.ReadFileBytes(a.fs, a.path(path.Join("rules", digest+".yaml")))
}
