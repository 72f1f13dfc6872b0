package main

import (
	"fmt"
	"io"
	"os"
	"strings"
	"time"

	"golang.org/x/term"
)

// A progress is one line on a terminal that says how far a long work is; nothing where standard error is no terminal.
type progress struct {
	on     bool
	files  int
	begun  int
	bytes  int64
	total  int64
	shown  time.Time
	length int
}

const progressEvery = 100 * time.Millisecond

func newProgress(files int) *progress {
	return &progress{on: term.IsTerminal(int(os.Stderr.Fd())), files: files}
}

// file says that the next file is begun.
func (p *progress) file(bytes int64) { p.begun, p.bytes, p.total = p.begun+1, 0, bytes }

// reader counts what is read of the file.
func (p *progress) reader(r io.Reader) io.Reader {
	if !p.on {
		return r
	}
	return &countingReader{r, p}
}

type countingReader struct {
	r io.Reader
	p *progress
}

func (c *countingReader) Read(b []byte) (int, error) {
	n, err := c.r.Read(b)
	c.p.bytes += int64(n)
	if c.p.total > 0 {
		c.p.show(fmt.Sprintf("reading file %d of %d", c.p.begun, c.p.files), float64(c.p.bytes)/float64(c.p.total))
	}
	return n, err
}

// step says that so many of the days are judged.
func (p *progress) step(done, of int) {
	p.show(fmt.Sprintf("judging day %d of %d", done, of), float64(done)/float64(of))
}

func (p *progress) show(what string, share float64) {
	if !p.on || time.Since(p.shown) < progressEvery {
		return
	}
	p.shown = time.Now()
	const width = 30
	full := min(int(share*width), width)
	line := fmt.Sprintf("%s%s %3.0f %%  %s", strings.Repeat("=", full), strings.Repeat(".", width-full), 100*share, what)
	fmt.Fprintf(os.Stderr, "\r%-*s", p.length, line)
	p.length = max(p.length, len(line))
}

// done clears the line.
func (p *progress) done() {
	if p.on && p.length > 0 {
		fmt.Fprintf(os.Stderr, "\r%s\r", strings.Repeat(" ", p.length))
		p.length = 0
	}
}
