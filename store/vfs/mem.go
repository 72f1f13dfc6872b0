package vfs

import (
	"fmt"
	"io"
	"io/fs"
	"math/rand/v2"
	"path"
	"slices"
	"strings"
	"sync"
)

// Mem is a file system in memory that can lose power. What was synced survives CrashClone; of the rest each piece survives by chance: the bytes
// of a file written since its last Sync, and each change of names (create, link, rename, remove, mkdir) since a SyncDir of its directory.
type Mem struct {
	mu      sync.Mutex
	names   map[string]*node // as programs see it
	durable map[string]*node // as the disk has it
	pending []change         // what is not yet durable, in order
	locks   map[string]string
}

type node struct {
	dir    bool
	data   []byte
	synced []byte // what a power cut leaves of data
}

// A change is a change of names: `to` gets the node, `from` loses it. Either may be empty.
type change struct {
	from, to string
	n        *node
}

// NewMem makes an empty file system with a root directory.
func NewMem() *Mem {
	root := &node{dir: true}
	return &Mem{names: map[string]*node{"/": root, ".": root}, durable: map[string]*node{"/": root, ".": root}, locks: map[string]string{}}
}

func notExist(op, name string) error { return &fs.PathError{Op: op, Path: name, Err: fs.ErrNotExist} }

func (m *Mem) apply(c change) {
	move(m.names, c)
	m.pending = append(m.pending, c)
}

func move(names map[string]*node, c change) {
	if c.from != "" {
		delete(names, c.from)
	}
	if c.to != "" {
		names[c.to] = c.n
	}
}

func (m *Mem) parentExists(name string) bool {
	d := m.names[path.Dir(name)]
	return d != nil && d.dir
}

// Create makes or empties a file.
func (m *Mem) Create(name string) (File, error) {
	m.mu.Lock()
	defer m.mu.Unlock()
	name = path.Clean(name)
	if !m.parentExists(name) {
		return nil, notExist("create", name)
	}
	n := m.names[name]
	if n == nil {
		n = &node{}
		m.apply(change{to: name, n: n})
	}
	n.data = nil
	return &memFile{m, n}, nil
}

type memFile struct {
	m *Mem
	n *node
}

func (f *memFile) Write(b []byte) (int, error) {
	f.m.mu.Lock()
	defer f.m.mu.Unlock()
	f.n.data = append(f.n.data[:len(f.n.data):len(f.n.data)], b...)
	return len(b), nil
}

func (f *memFile) Sync() error {
	f.m.mu.Lock()
	defer f.m.mu.Unlock()
	f.n.synced = f.n.data
	return nil
}

func (f *memFile) Close() error { return nil }

type memReader struct {
	*strings.Reader
}

func (memReader) Close() error { return nil }

// Open opens a file to read.
func (m *Mem) Open(name string) (ReadFile, error) {
	m.mu.Lock()
	defer m.mu.Unlock()
	n := m.names[path.Clean(name)]
	if n == nil || n.dir {
		return nil, notExist("open", name)
	}
	return memReader{strings.NewReader(string(n.data))}, nil
}

// ReadDir lists a directory.
func (m *Mem) ReadDir(name string) ([]Entry, error) {
	m.mu.Lock()
	defer m.mu.Unlock()
	name = path.Clean(name)
	if n := m.names[name]; n == nil || !n.dir {
		return nil, notExist("readdir", name)
	}
	var list []Entry
	for k, n := range m.names {
		if path.Dir(k) == name && k != name {
			list = append(list, Entry{path.Base(k), n.dir, int64(len(n.data))})
		}
	}
	slices.SortFunc(list, func(a, b Entry) int { return strings.Compare(a.Name, b.Name) })
	return list, nil
}

// Stat looks at one name.
func (m *Mem) Stat(name string) (Entry, error) {
	m.mu.Lock()
	defer m.mu.Unlock()
	n := m.names[path.Clean(name)]
	if n == nil {
		return Entry{}, notExist("stat", name)
	}
	return Entry{path.Base(name), n.dir, int64(len(n.data))}, nil
}

// Mkdir makes a directory.
func (m *Mem) Mkdir(name string) error {
	m.mu.Lock()
	defer m.mu.Unlock()
	name = path.Clean(name)
	if m.names[name] != nil {
		return &fs.PathError{Op: "mkdir", Path: name, Err: fs.ErrExist}
	}
	if !m.parentExists(name) {
		return notExist("mkdir", name)
	}
	m.apply(change{to: name, n: &node{dir: true}})
	return nil
}

// Rename moves a file, replacing what is there.
func (m *Mem) Rename(from, to string) error {
	m.mu.Lock()
	defer m.mu.Unlock()
	from, to = path.Clean(from), path.Clean(to)
	n := m.names[from]
	if n == nil || !m.parentExists(to) {
		return notExist("rename", from)
	}
	m.apply(change{from, to, n})
	return nil
}

// Link gives a file a second name, which must be new.
func (m *Mem) Link(from, to string) error {
	m.mu.Lock()
	defer m.mu.Unlock()
	from, to = path.Clean(from), path.Clean(to)
	n := m.names[from]
	if n == nil || !m.parentExists(to) {
		return notExist("link", from)
	}
	if m.names[to] != nil {
		return &fs.PathError{Op: "link", Path: to, Err: fs.ErrExist}
	}
	m.apply(change{to: to, n: n})
	return nil
}

// Remove removes a file or an empty directory.
func (m *Mem) Remove(name string) error {
	m.mu.Lock()
	defer m.mu.Unlock()
	name = path.Clean(name)
	if m.names[name] == nil {
		return notExist("remove", name)
	}
	for k := range m.names {
		if path.Dir(k) == name && k != name {
			return fmt.Errorf("remove %s: directory not empty", name)
		}
	}
	m.apply(change{from: name})
	return nil
}

// SyncDir makes the names in a directory durable: a rename is, once the directory that it goes to is synced.
func (m *Mem) SyncDir(name string) error {
	m.mu.Lock()
	defer m.mu.Unlock()
	name = path.Clean(name)
	if n := m.names[name]; n == nil || !n.dir {
		return notExist("syncdir", name)
	}
	rest := m.pending[:0:0]
	for _, c := range m.pending {
		at := c.to
		if at == "" {
			at = c.from
		}
		if path.Dir(at) == name {
			move(m.durable, c)
		} else {
			rest = append(rest, c)
		}
	}
	m.pending = rest
	return nil
}

type memLock struct {
	m    *Mem
	name string
}

func (l memLock) Close() error {
	l.m.mu.Lock()
	defer l.m.mu.Unlock()
	delete(l.m.locks, l.name)
	return nil
}

// Lock takes a lock that a crash releases.
func (m *Mem) Lock(name, text string) (io.Closer, error) {
	m.mu.Lock()
	defer m.mu.Unlock()
	name = path.Clean(name)
	if held, ok := m.locks[name]; ok {
		return nil, &HeldError{name, held}
	}
	m.locks[name] = text
	return memLock{m, name}, nil
}

// CrashClone gives the file system as a power cut could leave it: what was synced, and of each unsynced piece all, a part or nothing, with
// the chance given, 0 to 1. The original goes on as if nothing had been, and locks are gone in the clone.
func (m *Mem) CrashClone(rng *rand.Rand, unsyncedShare float64) *Mem {
	m.mu.Lock()
	defer m.mu.Unlock()
	names := map[string]*node{}
	for k, n := range m.durable {
		names[k] = n
	}
	for _, c := range m.pending {
		if rng.Float64() < unsyncedShare && (c.from == "" || names[c.from] != nil) {
			move(names, c)
		}
	}
	out := NewMem()
	copies := map[*node]*node{m.names["/"]: out.names["/"]}
	keys := make([]string, 0, len(names))
	for k := range names {
		keys = append(keys, k)
	}
	slices.Sort(keys)
	for _, k := range keys {
		n := names[k]
		if copies[n] == nil {
			data := n.synced
			if !n.dir && rng.Float64() < unsyncedShare {
				data = n.data
				if rng.Float64() < 0.3 && len(data) > 0 { // a part of the pages went out
					data = data[:rng.IntN(len(data))]
					if len(data) < len(n.synced) && string(n.data[:min(len(n.data), len(n.synced))]) == string(n.synced) {
						data = n.synced
					}
				}
			}
			copies[n] = &node{n.dir, data, data}
		}
		if d := names[path.Dir(k)]; k != "/" && k != "." && (d == nil || !d.dir) {
			continue // its directory is lost, and it with it
		}
		out.names[k], out.durable[k] = copies[n], copies[n]
	}
	return out
}
