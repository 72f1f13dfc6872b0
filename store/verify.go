package store

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"path"
	"regexp"
	"runtime"
	"slices"
	"strings"
	"sync"

	"fluxwarden/store/table"
	"fluxwarden/store/vfs"
)

// A Finding is something that is not as the archive's books say.
type Finding struct {
	Path    string
	Problem string
	Fatal   bool // rows or books are wrong or gone; otherwise it is only something that does not belong there
}

func (f Finding) String() string { return f.Path + ": " + f.Problem }

// Verify reads every file of the archive: those of the tree it holds against the books (size, sha256, rows, and each row digest anew), those
// that were superseded against the hash in their names, the books against their own check sums and the chain of records, and the rule
// sets. It names what is damaged, missing or foreign, in order of path, and changes nothing. A writer may be at work meanwhile. progress,
// if not nil, is called after each file, by one goroutine at a time. Files under staging/ and damaged/ are not looked at.
func (a *Archive) Verify(progress func(done, total int)) ([]Finding, error) {
	v := verification{a: a, known: map[string]bool{}, progress: progress}
	for i, p := range a.parts {
		p.mu.RLock()
		v.found = append(v.found, p.trouble...)
		for _, tables := range p.files {
			for _, list := range tables {
				for _, f := range list {
					v.known[f.Path] = true
					v.todo = append(v.todo, func() []Finding { return a.verifyListed(i, f) })
				}
			}
		}
		have := p.have
		p.mu.RUnlock()
		if n, err := a.firstRecord(i); have || err != nil || n > 0 {
			v.todo = append(v.todo, func() []Finding { return a.verifyRecords(i) })
		}
	}
	if err := v.listOthers(); err != nil {
		return nil, err
	}
	v.run()
	slices.SortStableFunc(v.found, func(x, y Finding) int { return strings.Compare(x.Path, y.Path) })
	return v.found, nil
}

// A verification is one run of Verify.
type verification struct {
	a        *Archive
	known    map[string]bool
	todo     []func() []Finding
	progress func(done, total int)

	mu    sync.Mutex
	done  int
	found []Finding
}

// run works the list off, as many files at a time as there are processors.
func (v *verification) run() {
	next := make(chan func() []Finding)
	var wg sync.WaitGroup
	for range runtime.GOMAXPROCS(0) {
		wg.Add(1)
		go func() {
			defer wg.Done()
			for f := range next {
				found := f()
				v.mu.Lock()
				v.found = append(v.found, found...)
				if v.done++; v.progress != nil {
					v.progress(v.done, len(v.todo))
				}
				v.mu.Unlock()
			}
		}()
	}
	for _, f := range v.todo {
		next <- f
	}
	close(next)
	wg.Wait()
}

// Names of the archive's own files outside the tree.
var (
	manifestName = regexp.MustCompile(`^manifest/\d\d\.json$`)
	recordName   = regexp.MustCompile(`^commit/\d\d/\d{12}\.json$`)
	rulesName    = regexp.MustCompile(`^rules/([^/]+\.yaml(\.sha256)?|schedule\.json\.sha256)$`)
	leftoverName = regexp.MustCompile(`^(manifest|rules)/[^/]+\.tmp$|^archive\.json\.tmp$`) // of a write that was cut short; the next replaces it
	hashedName   = regexp.MustCompile(`_e\d+_c\d+_([0-9a-f]{12})\.(parquet|jsonl)$`)
)

// listOthers adds the files that the books do not list.
func (v *verification) listOthers() error {
	a := v.a
	entries, err := a.fs.ReadDir(a.path("."))
	if err != nil {
		return err
	}
	one := func(name string) error {
		switch {
		case v.known[name] || manifestName.MatchString(name) || recordName.MatchString(name) || leftoverName.MatchString(name) || name == "lock":
		case name == scheduleName:
			v.todo = append(v.todo, a.verifySchedule)
		case name == "archive.json":
			v.todo = append(v.todo, a.verifyFormat)
		case strings.HasPrefix(name, "superseded/") && hashedName.MatchString(name):
			v.todo = append(v.todo, func() []Finding { return a.verifySuperseded(name) })
		case rulesName.MatchString(name):
			if strings.HasSuffix(name, ".yaml") {
				v.todo = append(v.todo, func() []Finding { return a.verifyRules(name) })
			}
		default:
			v.todo = append(v.todo, func() []Finding { return a.foreign(name) })
		}
		return nil
	}
	for _, e := range entries {
		switch {
		case !e.Dir:
			err = one(e.Name)
		case e.Name != "staging" && e.Name != "damaged":
			err = a.walkDir(e.Name, one)
		}
		if err != nil {
			return err
		}
	}
	return nil
}

func isTree(name string) bool {
	return slices.ContainsFunc(tables, func(t string) bool { return strings.HasPrefix(name, t+"/") })
}

// foreign says what a file is that is in no book. One that a writer has published or taken away meanwhile is none.
func (a *Archive) foreign(name string) []Finding {
	if isTree(name) && a.listedNow(name) {
		return nil
	}
	if ok, err := vfs.Exists(a.fs, a.path(name)); err == nil && !ok {
		return nil
	}
	problem := "put here by something else"
	if isTree(name) && strings.HasSuffix(name, ".parquet") {
		problem = a.foreignParquet(name)
	} else if isTree(name) {
		problem = "not in the books: " + problem
	}
	return []Finding{{name, problem, false}}
}

func (a *Archive) foreignParquet(name string) string {
	b, err := a.readBytes(File{Path: name})
	if err != nil {
		return fmt.Sprintf("not in the books, and cannot be read: %v", err)
	}
	if len(b) == 0 {
		return "not in the books: an empty file"
	}
	if _, _, err := table.Meta(bytes.NewReader(b), int64(len(b))); err != nil {
		return fmt.Sprintf("not in the books: %v", err)
	}
	return "not in the books: a Parquet file put here by something else; a glob over the tree reads its rows too"
}

// listedNow says whether the books list a file, after looking at what was committed meanwhile.
func (a *Archive) listedNow(name string) bool {
	for i, p := range a.parts {
		if p.lists(name) {
			return true
		}
		if a.lock == nil {
			if fresh := newPartition(); a.loadPartition(i, fresh) == nil && fresh.lists(name) {
				return true
			}
		}
	}
	return false
}

func (p *partition) lists(name string) bool {
	p.mu.RLock()
	defer p.mu.RUnlock()
	for _, tables := range p.files {
		for _, list := range tables {
			if slices.ContainsFunc(list, func(f File) bool { return f.Path == name }) {
				return true
			}
		}
	}
	return false
}

// verifyListed looks at a file of the books.
func (a *Archive) verifyListed(partition int, f File) []Finding {
	b, err := a.readBytes(f)
	if errors.Is(err, fs.ErrNotExist) {
		// A writer may have replaced it since the books were read.
		fresh := newPartition()
		if a.loadPartition(partition, fresh) == nil && !fresh.lists(f.Path) {
			return nil
		}
		return []Finding{{f.Path, "missing: the books list it", true}}
	}
	problem := ""
	switch {
	case err != nil:
		problem = fmt.Sprintf("cannot be read: %v", err)
	case f.SHA256 != "" && int64(len(b)) != f.Bytes:
		problem = fmt.Sprintf("%d bytes, %d were written", len(b), f.Bytes)
	case f.SHA256 != "" && sha(b) != f.SHA256 || !nameHolds(f.Path, b):
		problem = "bytes changed since it was written: its sha256 differs"
	case f.Table != TableState:
		problem = verifyRows(f.Table, f.Rows, b)
	}
	if problem != "" {
		return []Finding{{f.Path, problem, true}}
	}
	return nil
}

// nameHolds says whether the hash in a file's name is that of its bytes, as far as the name has one.
func nameHolds(name string, b []byte) bool {
	m := hashedName.FindStringSubmatch(path.Base(name))
	return m == nil || m[1] == sha(b)[:12]
}

func (a *Archive) verifySuperseded(name string) []Finding {
	b, err := vfs.ReadFileBytes(a.fs, a.path(name))
	problem := ""
	switch {
	case err != nil:
		problem = fmt.Sprintf("cannot be read: %v", err)
	case !nameHolds(name, b):
		problem = "bytes changed since it was written: its sha256 is not the one in its name"
	case strings.HasPrefix(name, "superseded/"+TableMinutes+"/"):
		problem = verifyRows(TableMinutes, -1, b)
	}
	if problem != "" {
		return []Finding{{name, problem, true}}
	}
	return nil
}

// verifyRows says what is wrong with a Parquet file's rows; rows below zero are not held against anything.
func verifyRows(tableName string, rows int, b []byte) string {
	t, err := table.Read(bytes.NewReader(b), int64(len(b)), nil)
	switch {
	case err != nil:
		return err.Error()
	case rows >= 0 && t.Rows != rows:
		return fmt.Sprintf("%d rows, %d were written", t.Rows, rows)
	case tableName == TableMinutes:
		return verifyDigests(t, daysOf(t), minutesDigest)
	case isProduct(tableName):
		return verifyDigests(t, productSpans(tableName, t), productDigest(tableName))
	}
	return ""
}

func minutesDigest(t *table.Table, from, to int) string { return table.Digest(t, from, to) }

// verifyDigests works out the digests of a file's rows anew, span by span.
func verifyDigests(t *table.Table, spans []monthDay, digest func(t *table.Table, from, to int) string) string {
	want := map[string]string{}
	if err := json.Unmarshal([]byte(t.Meta["row_digests"]), &want); err != nil {
		return fmt.Sprintf("metadata row_digests: %v", err)
	}
	if len(spans) != len(want) {
		return fmt.Sprintf("rows of %d days or months, digests of %d", len(spans), len(want))
	}
	for _, x := range spans {
		if got := digest(t, x.from, x.to); got != want[x.name()] {
			return fmt.Sprintf("rows of %s have the digest %s, committed was %s", x.name(), got, want[x.name()])
		}
	}
	return ""
}

// SetAside moves a file of the published tree to damaged/, with the reason beside it. It is never deleted. A file of the books stays in
// the books as missing until a commit replaces it.
func (a *Archive) SetAside(name, reason string) error {
	if a.lock == nil {
		return fmt.Errorf("set aside %s: archive %s is open to read only", name, a.dir)
	}
	to := path.Join("damaged", name)
	if err := a.writeAtomic(to+".reason", []byte(reason+"\n")); err != nil {
		return err
	}
	if err := a.fs.Rename(a.path(name), a.path(to)); err != nil {
		return err
	}
	return errors.Join(a.fs.SyncDir(path.Dir(a.path(to))), a.fs.SyncDir(path.Dir(a.path(name))))
}
