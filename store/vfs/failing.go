package vfs

import (
	"io"
	"sync"
)

// Failing wraps a file system and fails operations where Fail says so. Operations are counted from 0 over all files: create, open, readdir, stat,
// mkdir, rename, link, remove, syncdir, lock, write, sync, close.
type Failing struct {
	FS
	Fail func(op, name string, index int) error // nil goes on; it is asked of one operation at a time, in the order of their numbers

	asking sync.Mutex
	mu     sync.Mutex
	count  int
}

// Count is how many operations there were.
func (f *Failing) Count() int {
	f.mu.Lock()
	defer f.mu.Unlock()
	return f.count
}

func (f *Failing) ask(op, name string) error {
	f.asking.Lock()
	defer f.asking.Unlock()
	f.mu.Lock()
	i := f.count
	f.count++
	f.mu.Unlock()
	if f.Fail == nil {
		return nil
	}
	return f.Fail(op, name, i)
}

// Create makes a file whose operations are counted too.
func (f *Failing) Create(name string) (File, error) {
	if err := f.ask("create", name); err != nil {
		return nil, err
	}
	w, err := f.FS.Create(name)
	if err != nil {
		return nil, err
	}
	return &failingFile{w, f, name}, nil
}

type failingFile struct {
	File
	f    *Failing
	name string
}

func (w *failingFile) Write(b []byte) (int, error) {
	if err := w.f.ask("write", w.name); err != nil {
		n, _ := w.File.Write(b[:len(b)/2]) // a full disk takes a part
		return n, err
	}
	return w.File.Write(b)
}

func (w *failingFile) Sync() error {
	if err := w.f.ask("sync", w.name); err != nil {
		return err
	}
	return w.File.Sync()
}

func (w *failingFile) Close() error {
	if err := w.f.ask("close", w.name); err != nil {
		return err
	}
	return w.File.Close()
}

// Open opens a file to read.
func (f *Failing) Open(name string) (ReadFile, error) {
	if err := f.ask("open", name); err != nil {
		return nil, err
	}
	return f.FS.Open(name)
}

// ReadDir lists a directory.
func (f *Failing) ReadDir(name string) ([]Entry, error) {
	if err := f.ask("readdir", name); err != nil {
		return nil, err
	}
	return f.FS.ReadDir(name)
}

// Stat looks at one name.
func (f *Failing) Stat(name string) (Entry, error) {
	if err := f.ask("stat", name); err != nil {
		return Entry{}, err
	}
	return f.FS.Stat(name)
}

// Mkdir makes a directory.
func (f *Failing) Mkdir(name string) error {
	if err := f.ask("mkdir", name); err != nil {
		return err
	}
	return f.FS.Mkdir(name)
}

// Rename moves a file.
func (f *Failing) Rename(from, to string) error {
	if err := f.ask("rename", to); err != nil {
		return err
	}
	return f.FS.Rename(from, to)
}

// Link gives a file a second name.
func (f *Failing) Link(from, to string) error {
	if err := f.ask("link", to); err != nil {
		return err
	}
	return f.FS.Link(from, to)
}

// Remove removes a name.
func (f *Failing) Remove(name string) error {
	if err := f.ask("remove", name); err != nil {
		return err
	}
	return f.FS.Remove(name)
}

// SyncDir makes the names in a directory durable.
func (f *Failing) SyncDir(name string) error {
	if err := f.ask("syncdir", name); err != nil {
		return err
	}
	return f.FS.SyncDir(name)
}

// Lock takes a lock.
func (f *Failing) Lock(name, text string) (io.Closer, error) {
	if err := f.ask("lock", name); err != nil {
		return nil, err
	}
	return f.FS.Lock(name, text)
}
