package store

import (
	"errors"
	"fmt"
	"io/fs"
	"path"
	"runtime"
	"slices"
	"strings"
	"sync"
	"time"

	"fluxwarden/qc/engine"
	"fluxwarden/store/vfs"
)

// A draft is a commit on its way: what it writes and takes away.
type draft struct {
	c       *Commit
	a       *Archive
	p       *partition
	number  uint64
	jobs    []*job
	removes []Removed
	fresh   map[rawDay]bool   // days that gain readings
	reasons map[rawDay]string // why a day changes, where the writer said so
	made    *harvest          // what comes of the minutes beside their own files
}

type rawDay struct {
	station string
	day     int64
}

// A job makes one file.
type job struct {
	file File
	make func() (data []byte, f File, err error) // no data is no file of its own: what it makes is in the harvest
	none bool
}

// Commit writes everything the commit holds, all or nothing, and gives its record. When it returns without an error, all of it survives a
// power cut. With ErrLostPartition nothing has changed. After any other error the archive is as before or as after the commit: open it anew
// and look at the last record.
func (a *Archive) Commit(c *Commit) (Record, error) {
	d, err := a.draft(c)
	if err != nil {
		return Record{}, err
	}
	defer d.p.commit.Unlock()
	if err := d.plan(); err != nil {
		return Record{}, fmt.Errorf("commit: partition %02d: %w", c.Partition, err)
	}
	if err := d.encode(); err != nil {
		return Record{}, fmt.Errorf("commit: partition %02d: %w", c.Partition, err)
	}
	r, err := d.finish()
	if err != nil {
		return Record{}, fmt.Errorf("commit: partition %02d: record %d: %w", c.Partition, d.number, err)
	}
	return r, nil
}

// draft begins a commit; the partition's commits are locked until the caller unlocks them.
func (a *Archive) draft(c *Commit) (*draft, error) {
	if a.lock == nil {
		return nil, fmt.Errorf("commit: archive %s is open to read only", a.dir)
	}
	if c.Partition < 0 || c.Partition >= Partitions {
		return nil, fmt.Errorf("commit: partition %d: there are %d, from 0 on", c.Partition, Partitions)
	}
	p := a.parts[c.Partition]
	p.commit.Lock()
	var err error
	if p.broken != nil {
		err = fmt.Errorf("commit: partition %02d: an earlier commit ended half-way (%w); open the archive anew", c.Partition, p.broken)
	} else if c.Base != p.last.Number {
		err = fmt.Errorf("commit: partition %02d: stands on record %d, the last one is %d: %w", c.Partition, c.Base, p.last.Number, ErrLostPartition)
	}
	if err != nil {
		p.commit.Unlock()
		return nil, err
	}
	return &draft{c: c, a: a, p: p, number: c.Base + 1, made: &harvest{}}, nil
}

// plan lists the files to make.
func (d *draft) plan() error {
	for _, step := range []func() error{d.planRaw, d.planDays, d.planMonths, d.planRevisions, d.planFaults, d.planSummaries, d.planNotes} {
		if err := step(); err != nil {
			return err
		}
	}
	return nil
}

// current gives the files of a station's table as they are.
func (d *draft) current(station, tableName string) []File { return d.p.current(station, tableName) }

func (p *partition) current(station, tableName string) []File {
	p.mu.RLock()
	defer p.mu.RUnlock()
	return p.files[station][tableName]
}

// replace takes a file out of the tree: what was sealed is kept under superseded/, the rest is deleted.
func (d *draft) replace(f File) {
	r := Removed{Path: f.Path}
	if f.Sealed {
		r.To = path.Join("superseded", f.Path)
	}
	d.removes = append(d.removes, r)
}

// encode makes the files' bytes, as many at a time as there are processors.
func (d *draft) encode() error {
	errs := make([]error, len(d.jobs))
	slots := make(chan struct{}, runtime.GOMAXPROCS(0))
	var wg sync.WaitGroup
	for i, j := range d.jobs {
		wg.Add(1)
		slots <- struct{}{}
		go func() {
			defer wg.Done()
			defer func() { <-slots }()
			errs[i] = d.encodeOne(j)
		}()
	}
	wg.Wait()
	return errors.Join(errs...)
}

func (d *draft) encodeOne(j *job) error {
	data, f, err := j.make()
	if err != nil {
		return fmt.Errorf("%s of %s %s: %w", j.file.Table, j.file.Station, j.file.Period, err)
	}
	if j.none = data == nil; j.none {
		return nil
	}
	if err := d.write(&f, data); err != nil {
		return err
	}
	j.file = f
	return nil
}

// write stages a file under the name that its bytes give it.
func (d *draft) write(f *File, data []byte) error {
	f.SHA256, f.Bytes = sha(data), int64(len(data))
	suffix := ".parquet"
	if f.Table == TableState {
		suffix = ".jsonl"
	}
	name := f.Station
	if f.Period != "" {
		name += "_" + f.Period
	}
	base := fmt.Sprintf("%s_e%d_c%d_%s%s", name, d.c.Epoch, d.number, f.SHA256[:12], suffix)
	f.Path = path.Join(treeDir(f.Table, f.Station, f.Period), base)
	f.Staged = stagedPath(d.c.Partition, f.Table, base)
	if err := d.a.mkdir(path.Dir(f.Staged)); err != nil {
		return err
	}
	return d.a.writeSynced(f.Staged, data)
}

// stagedPath is where a file waits until its commit counts.
func stagedPath(partition int, tableName, base string) string {
	return path.Join("staging", partName(partition), strings.ReplaceAll(tableName, "/", "-")+"_"+base)
}

// finish makes the record, which is the moment of truth, and publishes.
func (d *draft) finish() (Record, error) {
	c, p, a := d.c, d.p, d.a
	if err := d.finishProducts(); err != nil {
		return Record{}, err
	}
	r := Record{Partition: c.Partition, Number: d.number, Epoch: c.Epoch, Positions: c.Positions, RulesDigest: c.RulesDigest, Program: c.Program, Judge: engine.JudgeVersion,
		Reason: c.Reason, Previous: p.hash, Removes: slices.Concat(d.removes, d.made.removes), Owed: c.Owed}
	if c.Owed == nil {
		r.Owed = p.last.Owed
	}
	if !c.Time.IsZero() {
		r.Time = c.Time.UTC().Format(time.RFC3339)
	}
	for _, j := range d.jobs {
		if !j.none {
			r.Files = append(r.Files, j.file)
		}
	}
	r.Files = append(r.Files, d.made.files...)
	if len(r.Files) > 0 {
		if err := a.fs.SyncDir(a.path(path.Join("staging", partName(c.Partition)))); err != nil {
			return Record{}, err
		}
	}
	hash, err := a.createRecord(&r)
	if errors.Is(err, ErrLostPartition) {
		d.drop()
		return Record{}, err
	}
	if err == nil {
		err = a.publish(&r)
	}
	if err != nil {
		p.broken = err // whether the record is durable is not known; only opening anew tells
		return Record{}, err
	}
	p.mu.Lock()
	defer p.mu.Unlock()
	p.fold(&r, hash)
	for _, f := range r.Files {
		if !a.knows(f.Station) {
			a.know(f.Station, c.Partition)
		}
	}
	if r.Number-p.checkpointed >= a.o.CheckpointEvery {
		if err := a.checkpoint(c.Partition, p); err != nil {
			return r, nil // the checkpoint only makes opening quick; the next one is tried at the next commit
		}
	}
	return r, nil
}

func (a *Archive) knows(station string) bool {
	a.mu.RLock()
	defer a.mu.RUnlock()
	_, ok := a.stations[station]
	return ok
}

func (a *Archive) know(station string, partition int) {
	a.mu.Lock()
	defer a.mu.Unlock()
	a.stations[station] = partition
}

// drop removes what a lost commit has staged. What cannot be removed is swept when the archive is opened.
func (d *draft) drop() {
	for _, j := range d.jobs {
		if !j.none {
			_ = d.a.fs.Remove(d.a.path(j.file.Staged))
		}
	}
	for _, f := range d.made.files {
		_ = d.a.fs.Remove(d.a.path(f.Staged))
	}
}

// createRecord creates the record's file, or says that another has: link(2) fails if the name is there.
func (a *Archive) createRecord(r *Record) (hash string, err error) {
	data, hash := r.encode()
	name := recordPath(r.Partition, r.Number)
	temp := path.Join("staging", partName(r.Partition), fmt.Sprintf("record_e%d_%012d.tmp", r.Epoch, r.Number))
	for _, d := range []string{path.Dir(name), path.Dir(temp)} {
		if err := a.mkdir(d); err != nil {
			return "", err
		}
	}
	if err := a.writeSynced(temp, data); err != nil {
		return "", err
	}
	err = a.fs.Link(a.path(temp), a.path(name))
	if errors.Is(err, fs.ErrExist) {
		_ = a.fs.Remove(a.path(temp))
		return "", fmt.Errorf("%w: %s is there already", ErrLostPartition, name)
	}
	if err != nil {
		return "", err
	}
	if err := a.fs.SyncDir(a.path(path.Dir(name))); err != nil {
		return "", err
	}
	if err := a.fs.Remove(a.path(temp)); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return "", err
	}
	return hash, a.notOvertaken(r, name)
}

// notOvertaken guards against a writer so late that the record it wanted to make has been made and pruned since. Records are pruned from the
// oldest on, so while the one before is there, this one has not been.
func (a *Archive) notOvertaken(r *Record, name string) error {
	overtaken := false
	if r.Number > 1 {
		ok, err := vfs.Exists(a.fs, a.path(recordPath(r.Partition, r.Number-1)))
		if err != nil {
			return err
		}
		overtaken = !ok
	}
	if r.Number == 1 || overtaken {
		probe := newPartition()
		if err := a.loadCheckpoint(r.Partition, probe); err != nil {
			return err
		}
		overtaken = probe.have && probe.last.Number >= r.Number
	}
	if overtaken {
		_ = a.fs.Remove(a.path(name))
		return fmt.Errorf("%w: the manifest stands on a later record already", ErrLostPartition)
	}
	return nil
}

// publish moves replaced files out of the tree and staged ones in. It can be done again.
func (a *Archive) publish(r *Record) error {
	var dirs []string
	touch := func(name string) {
		if d := path.Dir(name); !slices.Contains(dirs, d) {
			dirs = append(dirs, d)
		}
	}
	for _, x := range r.Removes {
		var err error
		if x.To == "" {
			err = a.fs.Remove(a.path(x.Path))
		} else {
			if err = a.mkdir(path.Dir(x.To)); err == nil {
				err = a.fs.Rename(a.path(x.Path), a.path(x.To))
				touch(x.To)
			}
		}
		if err != nil && !errors.Is(err, fs.ErrNotExist) {
			return err
		}
		touch(x.Path)
	}
	for _, f := range r.Files {
		if err := a.mkdir(path.Dir(f.Path)); err != nil {
			return err
		}
		if err := a.fs.Rename(a.path(f.Staged), a.path(f.Path)); err != nil {
			if ok, e := vfs.Exists(a.fs, a.path(f.Path)); !errors.Is(err, fs.ErrNotExist) || e != nil || !ok {
				return fmt.Errorf("publish %s: %w", f.Path, err)
			}
		}
		touch(f.Path)
	}
	for _, d := range dirs {
		if err := a.fs.SyncDir(a.path(d)); err != nil && !errors.Is(err, fs.ErrNotExist) {
			return err
		}
	}
	return nil
}

// recoverPartition finishes the last commit's publishing and sweeps what never became a commit.
func (a *Archive) recoverPartition(i int) error {
	p := a.parts[i]
	if p.have {
		// The record may have been seen only because the crash left its name behind unsynced: make it durable before anything hangs on it.
		if err := a.fs.SyncDir(a.path(path.Join("commit", partName(i)))); err != nil && !errors.Is(err, fs.ErrNotExist) {
			return err
		}
		if err := a.publish(&p.last); err != nil {
			return err
		}
	}
	dir := path.Join("staging", partName(i))
	list, err := a.fs.ReadDir(a.path(dir))
	if errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	if err != nil {
		return err
	}
	for _, e := range list {
		if err := a.fs.Remove(a.path(path.Join(dir, e.Name))); err != nil {
			return err
		}
	}
	return nil
}
