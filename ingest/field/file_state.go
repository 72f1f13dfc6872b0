package field

import (
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
)

// A filePlace is how far a file was taken. It is written after the gate's answer: what is behind it is on disk there.
type filePlace struct {
	Path   string   `json:"path"`
	ID     string   `json:"id"`     // device and inode, where the system has them
	Offset int64    `json:"offset"` // of the first byte not taken
	Lines  int      `json:"lines"`  // taken
	Header []string `json:"header,omitempty"`
	Tail   []byte   `json:"tail,omitempty"` // the last bytes before the offset: another file, or one written anew, has others there
}

// tailBytes is how much is compared before the place where reading goes on.
const tailBytes = 128

// A placeBook keeps the places of one station's files.
type placeBook struct {
	path   string // empty: not kept
	places map[string]*filePlace
}

// openPlaces reads the book. A damaged one is moved aside: files are read from their beginning again, and what is there already is
// dropped by the archive as a repeat.
func openPlaces(path string) (b *placeBook, damaged error) {
	b = &placeBook{path: path, places: map[string]*filePlace{}}
	if path == "" {
		return b, nil
	}
	text, err := os.ReadFile(path)
	if errors.Is(err, fs.ErrNotExist) {
		return b, nil
	}
	var list []*filePlace
	if err == nil {
		err = json.Unmarshal(text, &list)
	}
	for _, p := range list {
		if p == nil || p.Offset < 0 || p.Lines < 0 {
			err = errors.New("an entry makes no sense")
		}
	}
	if err != nil {
		_ = os.Rename(path, path+".damaged")
		return b, fmt.Errorf("places of followed files: %s: %w: moved aside; files are read from their beginning, and repeats are dropped", path, err)
	}
	for _, p := range list {
		b.places[p.Path] = p
	}
	return b, nil
}

// write replaces the book whole, durably.
func (b *placeBook) write() error {
	if b.path == "" {
		return nil
	}
	list := make([]*filePlace, 0, len(b.places))
	for _, p := range b.places {
		list = append(list, p)
	}
	text, err := json.Marshal(list)
	if err != nil {
		return err
	}
	tmp := b.path + ".tmp"
	f, err := os.OpenFile(tmp, os.O_WRONLY|os.O_CREATE|os.O_TRUNC, 0o640)
	if err != nil {
		return err
	}
	_, err = f.Write(text)
	if err == nil {
		err = f.Sync()
	}
	if e := f.Close(); err == nil {
		err = e
	}
	if err == nil {
		err = os.Rename(tmp, b.path)
	}
	if err != nil {
		return err
	}
	dir, err := os.Open(filepath.Dir(b.path))
	if err != nil {
		return err
	}
	defer dir.Close()
	return dir.Sync()
}
