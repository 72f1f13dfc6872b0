package field

import (
	"bufio"
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"fluxwarden/ingest/wire"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// FileSettings say whose files are followed and where what becomes of them is told.
type FileSettings struct {
	Station string
	Layout  *rules.FileLayout
	Places  string // file that keeps how far each was taken; empty: nowhere
	Door    Door
	// Refuse keeps lines that cannot be read: count of them, joined; optional.
	Refuse func(ctx context.Context, station string, reason wire.Reason, detail string, count int, lines []byte) error
	Log    *slog.Logger
}

// Times and bounds of following.
const (
	lookEvery     = time.Second
	batchReadings = 500
	batchBytes    = 256 << 10
	restAfter     = 10 * time.Minute // a last line without an end that has not grown for so long is whole
	retryFirst    = time.Second
	retryMost     = 30 * time.Second
	keptLineBytes = 32 << 10 // of refused lines of one kind and batch
)

// A Follower brings the lines of a station's files to the door, in the order of the files' bytes, and goes on where it was after a
// restart.
type Follower struct {
	s     FileSettings
	book  *placeBook
	once  once
	open  map[string]*os.File // kept so that a file that is renamed or deleted is still read to its end
	Taken int64               // readings on disk
	Wrong int64               // lines and readings refused
}

// NewFollower opens the book of places.
func NewFollower(s FileSettings) *Follower {
	if s.Log == nil {
		s.Log = slog.New(slog.DiscardHandler)
	}
	f := &Follower{s: s, once: once{log: s.Log}, open: map[string]*os.File{}}
	book, damaged := openPlaces(s.Places)
	f.book = book
	if damaged != nil {
		s.Log.Error("followed files", "cause", damaged)
	}
	return f
}

// Run follows until ctx ends.
func (f *Follower) Run(ctx context.Context) {
	defer f.Close()
	ticker := time.NewTicker(lookEvery)
	defer ticker.Stop()
	for {
		if err := f.Look(ctx); err != nil && ctx.Err() == nil {
			f.once.warn(err.Error(), "a followed file cannot be read; it is tried again", "station", f.s.Station, "cause", err)
		}
		select {
		case <-ctx.Done():
			return
		case <-ticker.C:
		}
	}
}

// Close gives the files free.
func (f *Follower) Close() {
	for _, file := range f.open {
		_ = file.Close()
	}
	clear(f.open)
}

// openMost bounds the files kept open: the newest of a folder are those that grow.
const openMost = 16

// Look takes all that is there now, file by file, the oldest first. What is wrong with one file does not keep the others.
func (f *Follower) Look(ctx context.Context) error {
	paths, err := f.paths()
	if err != nil {
		return err
	}
	var wrong error
	for i, path := range paths {
		if err := f.lookAt(ctx, path, i >= len(paths)-openMost); err != nil {
			wrong = errors.Join(wrong, fmt.Errorf("%s: %w", path, err))
		}
		if ctx.Err() != nil {
			return ctx.Err()
		}
	}
	f.gone(ctx, paths)
	return wrong
}

// paths are the files there are now, the oldest change first.
func (f *Follower) paths() ([]string, error) {
	paths, err := filepath.Glob(f.s.Layout.Path)
	if err != nil {
		return nil, err
	}
	changed := map[string]time.Time{}
	paths = slices.DeleteFunc(paths, func(p string) bool {
		info, err := os.Stat(p)
		if err != nil || !info.Mode().IsRegular() || strings.HasSuffix(p, ".tmp") {
			return true
		}
		changed[p] = info.ModTime()
		return false
	})
	slices.SortStableFunc(paths, func(a, b string) int { return changed[a].Compare(changed[b]) })
	return paths, nil
}

// gone reads what is left of files that were followed and are no longer there.
func (f *Follower) gone(ctx context.Context, paths []string) {
	for path, file := range f.open {
		if slices.Contains(paths, path) {
			continue
		}
		if place := f.book.places[path]; place != nil {
			if err := f.readOn(ctx, file, place, true); err != nil {
				continue // tried again at the next look
			}
		}
		_ = file.Close()
		delete(f.open, path)
		delete(f.book.places, path)
	}
}

func (f *Follower) lookAt(ctx context.Context, path string, keep bool) error {
	info, err := os.Stat(path)
	if err != nil {
		return err
	}
	place := f.book.places[path]
	id := fileID(info)
	if place != nil && place.ID != id { // another file under the name: the old one first, to its end
		if err := f.finishOld(ctx, path, place); err != nil {
			return err
		}
		place = nil
	}
	if place == nil {
		if moved := f.renamed(path, id); moved != nil {
			place = moved
		} else {
			place = &filePlace{ID: id}
		}
		place.Path = path
		f.book.places[path] = place
	}
	file := f.open[path]
	if file == nil {
		if info.Size() == place.Offset {
			return nil
		}
		if file, err = os.Open(path); err != nil {
			return err
		}
		if keep && len(f.open) < openMost {
			f.open[path] = file
		} else {
			defer file.Close()
		}
	}
	rest := time.Since(info.ModTime()) > restAfter
	return f.readOn(ctx, file, place, rest)
}

// renamed finds the place of a file that was followed under another name of the pattern.
func (f *Follower) renamed(path, id string) *filePlace {
	for name, p := range f.book.places {
		if name == path || p.ID != id || id == "" {
			continue
		}
		if info, err := os.Stat(name); err == nil && fileID(info) == id {
			continue // two names of one file
		}
		delete(f.book.places, name)
		if file := f.open[name]; file != nil {
			delete(f.open, name)
			f.open[path] = file
		}
		return p
	}
	return nil
}

// finishOld reads the rest of a file that no longer has its name: by the handle kept open, or under another name in its folder.
func (f *Follower) finishOld(ctx context.Context, path string, place *filePlace) error {
	file := f.open[path]
	delete(f.open, path)
	if file == nil {
		entries, err := os.ReadDir(filepath.Dir(path))
		if err != nil {
			return err
		}
		for _, e := range entries {
			info, err := e.Info()
			if err != nil || !info.Mode().IsRegular() || fileID(info) != place.ID || place.ID == "" {
				continue
			}
			name := filepath.Join(filepath.Dir(path), e.Name())
			if match, _ := filepath.Match(f.s.Layout.Path, name); match {
				f.move(place, name) // it is followed under that name
				return nil
			}
			if file, err = os.Open(name); err != nil {
				return err
			}
		}
	} else if info, err := file.Stat(); err == nil {
		// Under a name of the pattern it is taken on from there.
		for _, p := range globbed(f.s.Layout.Path) {
			if other, err := os.Stat(p); err == nil && p != path && os.SameFile(info, other) {
				f.move(place, p)
				return file.Close()
			}
		}
	}
	if file == nil {
		return nil
	}
	defer file.Close()
	return f.readOn(ctx, file, place, true)
}

// move keeps a place under the name that its file has now.
func (f *Follower) move(place *filePlace, name string) {
	moved := *place
	moved.Path = name
	f.book.places[name] = &moved
}

func globbed(pattern string) []string {
	paths, _ := filepath.Glob(pattern)
	return paths
}

// readOn takes what lies behind the place. With rest, a last line without an end is taken for whole.
func (f *Follower) readOn(ctx context.Context, file *os.File, place *filePlace, rest bool) error {
	info, err := file.Stat()
	if err != nil {
		return err
	}
	if !f.same(file, place, info.Size()) {
		f.once.warn("anew "+place.Path, "a followed file was truncated or written anew; it is read from its beginning", "station", f.s.Station, "file", place.Path)
		*place = filePlace{Path: place.Path, ID: place.ID}
	}
	if info.Size() == place.Offset {
		return nil
	}
	lines := newLineReader(f.s.Layout)
	if err := lines.resume(place.Lines, place.Header); err != nil {
		*place = filePlace{Path: place.Path, ID: place.ID} // the site file names other columns now
		lines = newLineReader(f.s.Layout)
	}
	in := bufio.NewReaderSize(io.NewSectionReader(file, place.Offset, info.Size()-place.Offset), 64<<10)
	for {
		b, err := f.batch(in, lines, place, rest)
		if err != nil {
			return err
		}
		if b.bytes == 0 {
			return nil
		}
		if err := f.bring(ctx, b); err != nil {
			return err
		}
		place.Offset += b.bytes
		place.Lines, place.Header = lines.lines, lines.Header
		place.Tail = tailOf(file, place.Offset)
		if err := f.book.write(); err != nil {
			return fmt.Errorf("its place is not kept: %w", err)
		}
	}
}

// same says whether the file is still the one whose beginning was taken.
func (f *Follower) same(file *os.File, place *filePlace, size int64) bool {
	return size >= place.Offset && bytes.Equal(tailOf(file, place.Offset), place.Tail)
}

func tailOf(file *os.File, offset int64) []byte {
	n := min(offset, tailBytes)
	if n == 0 {
		return nil
	}
	b := make([]byte, n)
	if _, err := file.ReadAt(b, offset-n); err != nil {
		return nil
	}
	return b
}

// A fileBatch is some lines of a file.
type fileBatch struct {
	readings []minute.Reading
	wrong    map[wire.Reason]*wrongLines
	bytes    int64
	path     string
}

type wrongLines struct {
	first string // detail, with the line's number
	count int
	lines []byte
}

func (f *Follower) batch(in *bufio.Reader, lines *lineReader, place *filePlace, rest bool) (*fileBatch, error) {
	b := &fileBatch{path: place.Path}
	for len(b.readings) < batchReadings && b.bytes < batchBytes {
		line, size, ended, err := nextLine(in)
		if err != nil && err != io.EOF {
			return nil, err
		}
		if size == 0 || (!ended && !rest) {
			break
		}
		reading, refusal, err := lines.take(line)
		if err != nil {
			return nil, err
		}
		b.bytes += size
		switch {
		case reading != nil:
			b.readings = append(b.readings, *reading)
		case refusal != nil:
			b.refuse(refusal, lines.lines, line)
		}
	}
	return b, nil
}

// nextLine gives a line without its end; of a line that is too long only the beginning.
func nextLine(in *bufio.Reader) (line []byte, size int64, ended bool, err error) {
	for {
		piece, err := in.ReadSlice('\n')
		size += int64(len(piece))
		if len(line) <= fileLineMax {
			line = append(line, piece...)
		}
		if err == bufio.ErrBufferFull {
			continue
		}
		ended = err == nil
		return bytes.TrimSuffix(line, []byte{'\n'}), size, ended, err
	}
}

func (b *fileBatch) refuse(r *wire.Refusal, number int, line []byte) {
	if b.wrong == nil {
		b.wrong = map[wire.Reason]*wrongLines{}
	}
	w := b.wrong[r.Reason]
	if w == nil {
		w = &wrongLines{first: fmt.Sprintf("%s:%d: %s", b.path, number, r.Detail)}
		b.wrong[r.Reason] = w
	}
	w.count++
	if len(w.lines)+len(line) < keptLineBytes {
		w.lines = append(append(w.lines, line...), '\n')
	}
}

// bring takes a batch to the door and comes back when it is on disk, or refused for good. It waits as long as the door says later.
func (f *Follower) bring(ctx context.Context, b *fileBatch) error {
	pause := retryFirst
	for len(b.readings) > 0 {
		a, err := f.s.Door.Take(ctx, f.s.Station, wire.EncodeJSON(nil, b.readings))
		if err == nil && !a.Retry {
			f.Taken += int64(a.N)
			f.Wrong += int64(len(a.Refused) + a.More)
			if len(a.Refused) > 0 {
				f.once.warn("refused "+a.Refused[0].Reason, "readings of a followed file are refused", "station", f.s.Station, "file", b.path, "reason", a.Refused[0].Reason,
					"detail", a.Refused[0].Detail, "readings", len(a.Refused)+a.More)
			}
			break
		}
		if ctx.Err() != nil {
			return ctx.Err()
		}
		reason := a.Reason
		if err != nil {
			reason = err.Error()
		}
		f.once.warn("later "+reason, "a followed file waits", "station", f.s.Station, "file", b.path, "cause", reason)
		timer := time.NewTimer(pause)
		select {
		case <-ctx.Done():
			timer.Stop()
			return ctx.Err()
		case <-timer.C:
		}
		pause = min(2*pause, retryMost)
	}
	for reason, w := range b.wrong {
		f.Wrong += int64(w.count)
		f.once.warn("line "+string(reason)+b.path, "lines of a followed file cannot be read", "station", f.s.Station, "reason", string(reason), "first", w.first, "lines", w.count)
		if f.s.Refuse != nil {
			if err := f.s.Refuse(ctx, f.s.Station, reason, w.first, w.count, w.lines); err != nil {
				return err
			}
		}
	}
	return nil
}
