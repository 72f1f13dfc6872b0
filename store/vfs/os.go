package vfs

import (
	"errors"
	"io"
	"os"
	"strings"

	"golang.org/x/sys/unix"
)

// OS is the real file system.
type OS struct{}

type osFile struct {
	*os.File
	size int64
}

func (f osFile) Size() int64 { return f.size }

// Create makes or empties a file.
func (OS) Create(name string) (File, error) {
	f, err := os.OpenFile(name, os.O_CREATE|os.O_TRUNC|os.O_WRONLY, 0o644)
	if err != nil {
		return nil, err
	}
	return f, nil
}

// Open opens a file to read.
func (OS) Open(name string) (ReadFile, error) {
	f, err := os.Open(name)
	if err != nil {
		return nil, err
	}
	st, err := f.Stat()
	if err != nil {
		f.Close()
		return nil, err
	}
	return osFile{f, st.Size()}, nil
}

// ReadDir lists a directory.
func (OS) ReadDir(name string) ([]Entry, error) {
	list, err := os.ReadDir(name)
	if err != nil {
		return nil, err
	}
	out := make([]Entry, 0, len(list))
	for _, e := range list {
		out = append(out, Entry{Name: e.Name(), Dir: e.IsDir(), Size: -1})
	}
	return out, nil
}

// Stat looks at one name.
func (OS) Stat(name string) (Entry, error) {
	st, err := os.Stat(name)
	if err != nil {
		return Entry{}, err
	}
	return Entry{Name: st.Name(), Dir: st.IsDir(), Size: st.Size()}, nil
}

// Mkdir makes a directory.
func (OS) Mkdir(name string) error { return os.Mkdir(name, 0o755) }

// Rename moves a file.
func (OS) Rename(from, to string) error { return os.Rename(from, to) }

// Link gives a file a second name, which must be new.
func (OS) Link(from, to string) error { return os.Link(from, to) }

// Remove removes a file or an empty directory.
func (OS) Remove(name string) error { return os.Remove(name) }

// SyncDir makes the names in a directory durable.
func (OS) SyncDir(name string) error {
	d, err := os.Open(name)
	if err != nil {
		return err
	}
	err = d.Sync()
	if e := d.Close(); err == nil {
		err = e
	}
	return err
}

// Lock takes an exclusive lock that ends with the process, and writes the text into the file for others to read.
func (OS) Lock(name, text string) (io.Closer, error) {
	f, err := os.OpenFile(name, os.O_CREATE|os.O_RDWR, 0o644)
	if err != nil {
		return nil, err
	}
	if err := unix.Flock(int(f.Fd()), unix.LOCK_EX|unix.LOCK_NB); err != nil {
		b, _ := io.ReadAll(io.LimitReader(f, 1000))
		f.Close()
		if errors.Is(err, unix.EWOULDBLOCK) {
			return nil, &HeldError{name, strings.TrimSpace(string(b))}
		}
		return nil, err
	}
	if err := f.Truncate(0); err == nil {
		_, err = f.WriteAt([]byte(text+"\n"), 0)
		if err != nil {
			f.Close()
			return nil, err
		}
	}
	return f, nil
}
