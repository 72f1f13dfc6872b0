package store

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"path"
	"slices"
	"strings"

	"fluxwarden/store/table"
)

// A Finding is something that is not as the archive's books say.
type Finding struct {
	Path    string
	Problem string
	Fatal   bool // rows are wrong or gone; otherwise it is only something that does not belong there
}

func (f Finding) String() string { return f.Path + ": " + f.Problem }

// Verify reads every file of the books, compares size, hash and rows, computes every row digest anew, and follows the chain of records. It names
// what is damaged, missing or foreign, and changes nothing. progress, if not nil, is called after each file.
func (a *Archive) Verify(progress func(done, total int)) ([]Finding, error) {
	var files []File
	var found []Finding
	known := map[string]bool{}
	for i, p := range a.parts {
		p.mu.RLock()
		for _, tables := range p.files {
			for _, list := range tables {
				files = append(files, list...)
			}
		}
		p.mu.RUnlock()
		found = append(found, a.verifyRecords(i)...)
	}
	slices.SortFunc(files, func(x, y File) int { return strings.Compare(x.Path, y.Path) })
	for n, f := range files {
		known[f.Path] = true
		if problem := a.verifyFile(f); problem != "" {
			found = append(found, Finding{f.Path, problem, true})
		}
		if progress != nil {
			progress(n+1, len(files))
		}
	}
	err := a.eachFile(func(name, _, _ string) error {
		if !known[name] {
			found = append(found, Finding{name, a.foreign(name), false})
		}
		return nil
	})
	return found, err
}

func (a *Archive) foreign(name string) string {
	if !strings.HasSuffix(name, ".parquet") {
		return "not in the books: put here by something else"
	}
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

// verifyFile says what is wrong with a file, empty for nothing.
func (a *Archive) verifyFile(f File) string {
	b, err := a.readBytes(f)
	if errors.Is(err, fs.ErrNotExist) {
		return "missing"
	}
	if err != nil {
		return fmt.Sprintf("cannot be read: %v", err)
	}
	if f.SHA256 == "" { // a summary file found in the tree, without books
		return ""
	}
	if int64(len(b)) != f.Bytes {
		return fmt.Sprintf("%d bytes, %d were written", len(b), f.Bytes)
	}
	if sha(b) != f.SHA256 {
		return "bytes changed since it was written: its sha256 differs"
	}
	if f.Table == TableState {
		return ""
	}
	t, err := table.Read(bytes.NewReader(b), int64(len(b)), nil)
	if err != nil {
		return err.Error()
	}
	if t.Rows != f.Rows {
		return fmt.Sprintf("%d rows, %d were written", t.Rows, f.Rows)
	}
	if f.Table == TableMinutes {
		return verifyDigests(t)
	}
	return ""
}

func verifyDigests(t *table.Table) string {
	want := map[string]string{}
	if err := json.Unmarshal([]byte(t.Meta["row_digests"]), &want); err != nil {
		return fmt.Sprintf("metadata row_digests: %v", err)
	}
	days := daysOf(t)
	if len(days) != len(want) {
		return fmt.Sprintf("rows of %d days, digests of %d", len(days), len(want))
	}
	for _, x := range days {
		if got := table.Digest(t, x.from, x.to); got != want[dayName(x.day)] {
			return fmt.Sprintf("rows of %s have the digest %s, committed was %s", dayName(x.day), got, want[dayName(x.day)])
		}
	}
	return ""
}

// verifyRecords follows the records that are still there.
func (a *Archive) verifyRecords(i int) []Finding {
	n, err := a.firstRecord(i)
	if err != nil {
		return []Finding{{path.Join("commit", partName(i)), err.Error(), true}}
	}
	if n == 0 {
		return nil
	}
	var found []Finding
	previous := ""
	for ; ; n++ {
		r, hash, err := a.readRecord(i, n)
		if errors.Is(err, fs.ErrNotExist) {
			break
		}
		if err != nil {
			return append(found, Finding{recordPath(i, n), err.Error(), true})
		}
		if previous != "" && r.Previous != previous {
			found = append(found, Finding{recordPath(i, n), "does not follow the record before it: one of the two was changed", true})
		}
		previous = hash
	}
	p := a.parts[i]
	p.mu.RLock()
	defer p.mu.RUnlock()
	if p.have && n-1 < p.last.Number {
		found = append(found, Finding{recordPath(i, n), fmt.Sprintf("missing: the manifest stands on record %d", p.last.Number), true})
	} else if p.have && n-1 == p.last.Number && previous != p.hash {
		found = append(found, Finding{recordPath(i, n-1), "bytes changed: its sha256 is not the manifest's", true})
	}
	return found
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
