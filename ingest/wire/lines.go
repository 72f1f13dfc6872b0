package wire

import (
	"bytes"
	"errors"
	"io"
)

var errLineTooLong = errors.New("line too long")

// A lineReader gives the lines of a file without copying them. A line is good until the next is asked for.
type lineReader struct {
	in         io.Reader
	buf        []byte
	start, end int
	err        error
}

func newLineReader(in io.Reader) *lineReader {
	return &lineReader{in: in, buf: make([]byte, csvReadBytes)}
}

// next gives the next line without its newline; ended says whether it had one. A line longer than LineBytesMax is passed
// over with errLineTooLong.
func (l *lineReader) next() (line []byte, ended bool, err error) {
	searched := 0
	tooLong := false
	for {
		if k := bytes.IndexByte(l.buf[l.start+searched:l.end], '\n'); k >= 0 {
			line = l.buf[l.start : l.start+searched+k]
			l.start += searched + k + 1
			if tooLong || len(line) > LineBytesMax {
				return nil, true, errLineTooLong
			}
			return line, true, nil
		}
		searched = l.end - l.start
		if searched > LineBytesMax { // keep nothing of it
			tooLong, l.start, searched = true, l.end, 0
		}
		if l.err != nil {
			line, l.start = l.buf[l.start:l.end], l.end
			switch {
			case tooLong:
				return nil, false, errLineTooLong
			case len(line) > 0 && l.err == io.EOF:
				return line, false, nil
			}
			return nil, false, l.err
		}
		l.fill()
	}
}

func (l *lineReader) fill() {
	if l.start > 0 {
		copy(l.buf, l.buf[l.start:l.end])
		l.start, l.end = 0, l.end-l.start
	}
	if l.end == len(l.buf) {
		l.buf = append(l.buf, make([]byte, len(l.buf))...)
	}
	n, err := l.in.Read(l.buf[l.end:])
	l.end += n
	l.err = err
}
