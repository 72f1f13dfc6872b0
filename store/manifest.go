package store

import (
	"cmp"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"path"
	"runtime"
	"slices"
	"sync"

	"fluxwarden/store/vfs"
)

// keepRecords is how many records before a checkpoint stay, for those who want to look back.
const keepRecords = 1000

// A partition is the current set of files of one partition: its commit records, folded.
type partition struct {
	mu           sync.RWMutex
	commit       sync.Mutex // held through a commit
	last         Record
	hash         string // of the last record
	have         bool
	checkpointed uint64                       // number of the record that the checkpoint stands on
	pruned       uint64                       // records up to here are deleted
	broken       error                        // a commit ended half-way
	trouble      []Finding                    // what was wrong with the books when they were read
	files        map[string]map[string][]File // by station, then table; by period and path
}

func newPartition() *partition { return &partition{files: map[string]map[string][]File{}} }

// A checkpoint is manifest/<partition>.json.
type checkpointFile struct {
	Record Record `json:"record"`
	Hash   string `json:"hash"`
	Pruned uint64 `json:"pruned"`
	Files  []File `json:"files"`
}

func (p *partition) fold(r *Record, hash string) {
	for _, x := range r.Removes {
		p.remove(x.Path)
	}
	for _, f := range r.Files {
		f.Digests, f.Staged = nil, ""
		p.add(f)
	}
	p.last, p.hash, p.have = *r, hash, true
}

func (p *partition) add(f File) {
	t := p.files[f.Station]
	if t == nil {
		t = map[string][]File{}
		p.files[f.Station] = t
	}
	list := t[f.Table]
	i, found := slices.BinarySearchFunc(list, f, compareFiles)
	if found {
		list[i] = f
		return
	}
	t[f.Table] = slices.Insert(slices.Clone(list), i, f) // readers may hold the old list
}

// compareFiles sorts by period, so by time; a month comes before its days.
func compareFiles(a, b File) int {
	return cmp.Or(cmp.Compare(a.Period, b.Period), cmp.Compare(a.Path, b.Path))
}

func (p *partition) remove(name string) {
	for _, tables := range p.files {
		for t, list := range tables {
			if i := slices.IndexFunc(list, func(f File) bool { return f.Path == name }); i >= 0 {
				tables[t] = slices.Delete(slices.Clone(list), i, i+1)
				return
			}
		}
	}
}

// load reads all partitions' checkpoints and the records after them.
func (a *Archive) load() error {
	errs := make([]error, Partitions)
	var wg sync.WaitGroup
	slots := make(chan struct{}, runtime.GOMAXPROCS(0))
	for i := range a.parts {
		wg.Add(1)
		slots <- struct{}{}
		go func() {
			defer wg.Done()
			errs[i] = a.loadWhole(i, a.parts[i])
			<-slots
		}()
	}
	wg.Wait()
	if err := errors.Join(errs...); err != nil {
		return err
	}
	for i := range a.parts {
		a.knowStations(i)
	}
	return a.adopt()
}

// loadWhole is loadPartition, and errs where a record is missing before later ones.
func (a *Archive) loadWhole(i int, p *partition) error {
	if err := a.loadPartition(i, p); err != nil {
		return err
	}
	return a.noGap(i, p.last.Number+1)
}

func (a *Archive) knowStations(i int) {
	a.mu.Lock()
	defer a.mu.Unlock()
	for s := range a.parts[i].files {
		a.stations[s] = i
	}
}

func (a *Archive) loadPartition(i int, p *partition) error {
	p.mu.Lock()
	defer p.mu.Unlock()
	damage := a.loadCheckpoint(i, p)
	if damage != nil {
		p.trouble = append(p.trouble, Finding{checkpointPath(i), damage.Error(), true})
	}
	next := p.last.Number + 1
	if !p.have {
		var err error
		if next, err = a.firstRecord(i); err != nil {
			return err
		}
		if next == 0 && damage != nil {
			return a.rebuildPartition(i, p)
		}
		if next == 0 {
			return nil
		}
	}
	return a.foldFrom(i, p, next)
}

func (a *Archive) loadCheckpoint(i int, p *partition) error {
	b, err := vfs.ReadFileBytes(a.fs, a.path(checkpointPath(i)))
	if errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	if err != nil {
		return err
	}
	var c checkpointFile
	if err := json.Unmarshal(b, &c); err != nil {
		return fmt.Errorf("damaged: %w; the books are taken from the records or the tree, and it is written anew with the next ones", err)
	}
	if c.Record.Number == 0 || c.Record.Partition != i || !checkHolds(b, manifestCheck, "}", &checkpointFile{}) {
		return errors.New("bytes changed since it was written; the books are taken from the records or the tree, and it is written anew with the next ones")
	}
	p.last, p.hash, p.have, p.checkpointed, p.pruned = c.Record, c.Hash, true, c.Record.Number, c.Pruned
	for _, f := range c.Files {
		t := p.files[f.Station]
		if t == nil {
			t = map[string][]File{}
			p.files[f.Station] = t
		}
		t[f.Table] = append(t[f.Table], f)
	}
	return nil
}

func checkpointPath(i int) string { return path.Join("manifest", partName(i)+".json") }

// firstRecord gives the number of the oldest record that is there, 0 for none.
func (a *Archive) firstRecord(i int) (uint64, error) {
	list, err := a.fs.ReadDir(a.path(path.Join("commit", partName(i))))
	if errors.Is(err, fs.ErrNotExist) {
		return 0, nil
	}
	if err != nil {
		return 0, err
	}
	first := uint64(0)
	for _, e := range list {
		var n uint64
		if _, err := fmt.Sscanf(e.Name, "%d.json", &n); err == nil && recordPath(i, n) == path.Join("commit", partName(i), e.Name) && (first == 0 || n < first) {
			first = n
		}
	}
	return first, nil
}

func (a *Archive) foldFrom(i int, p *partition, next uint64) error {
	if next > 1 && !p.have {
		if err := a.rebuildPartition(i, p); err != nil {
			return err
		}
	}
	for ; ; next++ {
		r, hash, err := a.readRecord(i, next)
		if errors.Is(err, fs.ErrNotExist) {
			return nil
		}
		if err != nil {
			return err
		}
		if p.have && p.hash != "" && r.Previous != p.hash {
			return fmt.Errorf("archive %s: %s: does not follow the record before it; one of them was changed or restored from elsewhere: "+
				"%s", a.dir, recordPath(i, next), mendBooks(i))
		}
		p.fold(&r, hash)
	}
}

func (a *Archive) readRecord(i int, n uint64) (Record, string, error) {
	name := recordPath(i, n)
	b, err := vfs.ReadFileBytes(a.fs, a.path(name))
	if err != nil {
		return Record{}, "", err
	}
	var r Record
	if err := json.Unmarshal(b, &r); err != nil {
		return Record{}, "", fmt.Errorf("archive %s: %s: damaged: %w; %s", a.dir, name, err, mendBooks(i))
	}
	if r.Number != n || r.Partition != i {
		return Record{}, "", fmt.Errorf("archive %s: %s: out of order: it holds record %d of partition %02d; %s", a.dir, name, r.Number, r.Partition, mendBooks(i))
	}
	if !checkHolds(b, recordCheck, "\n}\n", &Record{}) {
		return Record{}, "", fmt.Errorf("archive %s: %s: bytes changed since it was written: its check sum differs; %s", a.dir, name, mendBooks(i))
	}
	return r, sha(b), nil
}

// checkpoint writes the manifest, and deletes records far behind it.
func (a *Archive) checkpoint(i int, p *partition) error {
	c := checkpointFile{Record: p.last, Hash: p.hash, Pruned: p.pruned}
	for _, tables := range p.files {
		for _, list := range tables {
			c.Files = append(c.Files, list...)
		}
	}
	slices.SortFunc(c.Files, func(x, y File) int {
		return cmp.Or(cmp.Compare(x.Station, y.Station), cmp.Compare(x.Table, y.Table), compareFiles(x, y))
	})
	b, err := json.Marshal(&c)
	if err != nil {
		return err
	}
	if err := a.writeAtomic(checkpointPath(i), withCheck(b, manifestCheck, "}")); err != nil {
		return err
	}
	p.checkpointed = p.last.Number
	for ; p.pruned+keepRecords < p.checkpointed; p.pruned++ {
		if err := a.fs.Remove(a.path(recordPath(i, p.pruned+1))); err != nil && !errors.Is(err, fs.ErrNotExist) {
			return err
		}
	}
	return nil
}
