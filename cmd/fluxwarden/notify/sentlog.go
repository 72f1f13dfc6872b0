package notify

import (
	"bufio"
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"sync"
	"time"
)

// A sentLine is one message that went out, or was given up.
type sentLine struct {
	Way        string    `json:"way"`
	Key        string    `json:"key"`
	Event      string    `json:"event"`
	ID         string    `json:"id"`
	Rev        int       `json:"rev"`
	Station    string    `json:"station,omitempty"`
	Instrument string    `json:"instrument,omitempty"`
	Kind       string    `json:"kind,omitempty"`
	At         time.Time `json:"at"`
	GivenUp    string    `json:"given_up,omitempty"`
}

// A sentLog is what was told last of each episode on each way: a file of JSON lines, appended and synced. The last line of an episode
// counts. A torn last line, as a power cut leaves it, is cut off.
type sentLog struct {
	mu    sync.Mutex
	file  *os.File
	path  string
	of    map[[2]string]*sentLine
	lines int
}

// Bounds of the log: it is written anew with the last lines only when it has grown, and what is so old is forgotten.
const (
	sentLinesMax = 20_000
	sentKeptFor  = 400 * 24 * time.Hour
)

func openSentLog(path string) (*sentLog, error) {
	s := &sentLog{path: path, of: map[[2]string]*sentLine{}}
	text, err := os.ReadFile(path)
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return nil, fmt.Errorf("notify: sent log %s: %w", path, err)
	}
	whole := text[:bytes.LastIndexByte(text, '\n')+1]
	for in := bufio.NewScanner(bytes.NewReader(whole)); in.Scan(); s.lines++ {
		var l sentLine
		if err := json.Unmarshal(in.Bytes(), &l); err != nil {
			return nil, fmt.Errorf("notify: sent log %s: line %d: %w; move the file away: open faults are then told once more", path, s.lines+1, err)
		}
		s.of[[2]string{l.Way, l.ID}] = &l
	}
	if err := s.rewrite(); err != nil {
		return nil, fmt.Errorf("notify: sent log %s: %w", path, err)
	}
	return s, nil
}

// rewrite makes the file anew, whole, with what counts of it, and opens it to append.
func (s *sentLog) rewrite() error {
	var newest time.Time
	for _, l := range s.of {
		if l.At.After(newest) {
			newest = l.At
		}
	}
	var text bytes.Buffer
	n := 0
	for key, l := range s.of {
		if newest.Sub(l.At) > sentKeptFor && l.Event != Raised && l.Event != Changed {
			delete(s.of, key)
			continue
		}
		line, err := json.Marshal(l)
		if err != nil {
			return err
		}
		text.Write(append(line, '\n'))
		n++
	}
	temporary := s.path + ".tmp"
	f, err := os.OpenFile(temporary, os.O_CREATE|os.O_TRUNC|os.O_WRONLY, 0o640)
	if err != nil {
		return err
	}
	_, err = f.Write(text.Bytes())
	if err == nil {
		err = f.Sync()
	}
	if err == nil {
		err = os.Rename(temporary, s.path)
	}
	if err == nil {
		err = syncDir(filepath.Dir(s.path))
	}
	if err != nil {
		f.Close()
		return err
	}
	if s.file != nil {
		s.file.Close()
	}
	s.file, s.lines = f, n
	return nil
}

func syncDir(dir string) error {
	d, err := os.Open(dir)
	if err != nil {
		return err
	}
	defer d.Close()
	return d.Sync()
}

// add notes a message durably.
func (s *sentLog) add(l sentLine) error {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.of[[2]string{l.Way, l.ID}] = &l // even if it cannot be written: within this life it is not sent again
	line, err := json.Marshal(l)
	if err != nil {
		return err
	}
	if s.lines > sentLinesMax+2*len(s.of) {
		return s.rewrite()
	}
	s.lines++
	if _, err := s.file.Write(append(line, '\n')); err != nil {
		return err
	}
	return s.file.Sync()
}

// last is what was told last of an episode on a way; nil if nothing was.
func (s *sentLog) last(way, id string) *sentLine {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.of[[2]string{way, id}]
}

// open lists what a way has told of a station's episodes and not yet told the end of.
func (s *sentLog) open(way, station string) []sentLine {
	s.mu.Lock()
	defer s.mu.Unlock()
	var all []sentLine
	for _, l := range s.of {
		if l.Way == way && l.Station == station && (l.Event == Raised || l.Event == Changed) {
			all = append(all, *l)
		}
	}
	return all
}

func (s *sentLog) close() error {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.file.Close()
}
