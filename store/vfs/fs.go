// Package vfs is the little that the archive asks of a file system: a real one, one in memory that can lose power, and one
// that fails where a test says. Names use slashes.
package vfs

import (
	"errors"
	"io"
	"io/fs"
)

// An FS is a file system. Nothing is safe from a power cut before the file's Sync and the SyncDir of its directory.
type FS interface {
	Create(name string) (File, error)          // a new file, or an old one emptied
	Open(name string) (ReadFile, error)        // to read
	ReadDir(name string) ([]Entry, error)      // sorted by name
	Stat(name string) (Entry, error)           //
	Mkdir(name string) error                   // fs.ErrExist if it is there
	Rename(from, to string) error              // replaces what is there
	Link(from, to string) error                // fs.ErrExist if `to` is there: the one exclusive step of a commit
	Remove(name string) error                  // a file or an empty directory
	SyncDir(name string) error                 // makes names in the directory durable
	Lock(name, text string) (io.Closer, error) // a *HeldError if another holds it; readers of the file see the text
}

// A File is a file being written.
type File interface {
	io.Writer
	Sync() error
	Close() error
}

// A ReadFile is a file being read. ReadAt may be used by several goroutines.
type ReadFile interface {
	io.ReaderAt
	Size() int64
	Close() error
}

// An Entry is a name in a directory.
type Entry struct {
	Name string
	Dir  bool
	Size int64
}

// A HeldError says that another process holds a lock, with what it wrote into it.
type HeldError struct{ Name, Text string }

func (e *HeldError) Error() string { return "lock " + e.Name + ": held by " + e.Text }

// ReadFileBytes reads a whole file.
func ReadFileBytes(f FS, name string) ([]byte, error) {
	r, err := f.Open(name)
	if err != nil {
		return nil, err
	}
	defer r.Close()
	b := make([]byte, r.Size())
	n, err := r.ReadAt(b, 0)
	if n == len(b) && errors.Is(err, io.EOF) {
		err = nil
	}
	return b[:n], err
}

// Exists says whether the name is there.
func Exists(f FS, name string) (bool, error) {
	_, err := f.Stat(name)
	if errors.Is(err, fs.ErrNotExist) {
		return false, nil
	}
	return err == nil, err
}
