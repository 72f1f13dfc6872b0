package wire

import (
	"bufio"
	"bytes"
	"compress/gzip"
	"errors"
	"fmt"
	"io"
	"math"
	"strings"

	"fluxwarden/qc/minute"
)

const (
	TimeColumn        = "time"
	LineBytesMax      = 1 << 20
	BatchRowsDefault  = 65_536
	RefusalsKeptMax   = 1000 // of one file; the rest are counted only
	csvReadBytes      = 256 << 10
	csvFieldsMax      = ChannelsMax + 1
	byteOrderMark     = "\ufeff"
	gzipMagic         = "\x1f\x8b"
	headerShownMax    = 8 // column names in a message
	csvMendTimeColumn = "name the column with the times `time`"
)

// CSVOptions say how a file is read.
type CSVOptions struct {
	Name    string                 // of the file, for messages
	Station string                 // whose readings they are
	Rows    int                    // in one batch; 0 is BatchRowsDefault
	Known   func(name string) bool // which channels a site file declares; nil: all
}

// A LineRefusal says which line of a file was not taken, and why. It is an error.
type LineRefusal struct {
	Name   string // of the file
	Line   int    // from 1
	Column int    // from 1; 0 where the whole line is meant
	Reason Reason
	Detail string // what was found and how to mend it
}

func (r *LineRefusal) Error() string {
	if r.Column > 0 {
		return fmt.Sprintf("%s:%d: column %d: %s: %s", r.Name, r.Line, r.Column, r.Reason, r.Detail)
	}
	return fmt.Sprintf("%s:%d: %s: %s", r.Name, r.Line, r.Reason, r.Detail)
}

// A CSV reads a file of readings: a header, a column `time` (RFC 3339 with a zone), and one column a channel. The lines
// may be in any order of time. An empty field is no value. It takes a byte order mark, CRLF, quoted fields, blank lines
// and gzip. A bad line is refused and the rest goes on.
type CSV struct {
	options  CSVOptions
	lines    *lineReader
	line     int
	names    []string // a column each
	time     int      // which of them is the time
	channels []string // the others, in the file's order
	unknown  []string
	values   []float64 // of the line in hand
	fields   [][]byte  // of a quoted line
	refused  []LineRefusal
	count    int
	rows     int64
	done     bool
}

// NewCSV reads the header. What is wrong with it is fatal, as a *LineRefusal.
func NewCSV(r io.Reader, options CSVOptions) (*CSV, error) {
	if options.Rows <= 0 {
		options.Rows = BatchRowsDefault
	}
	c := &CSV{options: options, time: -1}
	in := bufio.NewReaderSize(r, 4096)
	if magic, _ := in.Peek(len(gzipMagic)); string(magic) == gzipMagic {
		z, err := gzip.NewReader(in)
		if err != nil {
			return nil, fmt.Errorf("%s: gzip header: %w", options.Name, err)
		}
		c.lines = newLineReader(z)
	} else {
		c.lines = newLineReader(in)
	}
	for {
		line, _, err := c.lines.next()
		c.line++
		if err == io.EOF {
			return nil, c.at(0, MissingKey, "the file has no header: its first line names the columns, one of them `time`")
		}
		if err == errLineTooLong {
			return nil, c.at(0, LineTooLong, fmt.Sprintf("the header is longer than %d bytes: is this a CSV file?", LineBytesMax))
		}
		if err != nil {
			return nil, fmt.Errorf("%s:%d: %w", options.Name, c.line, err)
		}
		if c.line == 1 {
			line = bytes.TrimPrefix(line, []byte(byteOrderMark))
		}
		if len(bytes.TrimSpace(line)) == 0 {
			continue
		}
		if f := c.header(line); f != nil {
			return nil, f
		}
		return c, nil
	}
}

func (c *CSV) at(column int, reason Reason, detail string) *LineRefusal {
	return &LineRefusal{c.options.Name, c.line, column, reason, detail}
}

func (c *CSV) header(line []byte) *LineRefusal {
	fields, ok := splitFields(nil, line)
	if !ok {
		return c.at(0, BadFields, "a quote of the header is not closed")
	}
	if len(fields) > csvFieldsMax {
		return c.at(0, TooManyChannels, fmt.Sprintf("%d columns, the limit is %d", len(fields), csvFieldsMax))
	}
	seen := make(map[string]int)
	for i, f := range fields {
		name := string(bytes.TrimSpace(f))
		if first, twice := seen[name]; twice {
			return c.at(i+1, DuplicateKey, fmt.Sprintf("%s is the name of column %d already: rename one of them", quote(f), first))
		}
		seen[name] = i + 1
		c.names = append(c.names, name)
		if name == TimeColumn {
			c.time = i
		}
	}
	if c.time < 0 {
		return c.at(0, MissingKey, c.noTime(line))
	}
	for i, name := range c.names {
		if i == c.time {
			continue
		}
		if !validChannel([]byte(name)) {
			return c.at(i+1, BadChannel, fmt.Sprintf("channel %s: a name is 1 to %d of a-z 0-9 _ . -", quote([]byte(name)), ChannelNameBytesMax))
		}
		c.channels = append(c.channels, name)
		if c.options.Known != nil && !c.options.Known(name) {
			c.unknown = append(c.unknown, name)
		}
	}
	c.values = make([]float64, len(c.channels))
	return nil
}

// noTime says what a header without a time column may have meant.
func (c *CSV) noTime(line []byte) string {
	for _, separator := range []string{";", "\t"} {
		if len(c.names) == 1 && bytes.Contains(line, []byte(separator)) {
			return fmt.Sprintf("no column `time`: the columns seem to be separated by %q; use a comma, and a point in numbers", separator)
		}
	}
	for i, name := range c.names {
		if strings.EqualFold(name, TimeColumn) || strings.EqualFold(name, "timestamp") || strings.EqualFold(name, "datetime") {
			return fmt.Sprintf("no column `time`: column %d is %s; %s", i+1, quote([]byte(name)), csvMendTimeColumn)
		}
	}
	shown := c.names[:min(len(c.names), headerShownMax)]
	return fmt.Sprintf("no column `time` among %s; %s", quote([]byte(strings.Join(shown, ","))), csvMendTimeColumn)
}

// Channels are the columns beside the time, in the file's order.
func (c *CSV) Channels() []string { return c.channels }

// Unknown are the channels that no instrument is declared to read. They are kept all the same.
func (c *CSV) Unknown() []string { return c.unknown }

// Rows is how many readings were taken so far.
func (c *CSV) Rows() int64 { return c.rows }

// Line is the line read last.
func (c *CSV) Line() int { return c.line }

// Refused gives the first RefusalsKeptMax refusals so far, and how many there were.
func (c *CSV) Refused() (kept []LineRefusal, count int) { return c.refused, c.count }

// Next empties the batch, fills it with the next readings and returns nil; or io.EOF where there are none left. Any other error
// is one of reading the file, after which nothing more can be had. The batch's memory is used again; one with other
// columns is given new ones.
func (c *CSV) Next(b *minute.Batch) error {
	c.prepare(b)
	for !c.done && len(b.At) < c.options.Rows {
		line, ended, err := c.lines.next()
		if err == io.EOF {
			break
		}
		c.line++
		if err == errLineTooLong {
			c.refuse(c.at(0, LineTooLong, fmt.Sprintf("longer than %d bytes", LineBytesMax)))
			continue
		}
		if errors.Is(err, io.ErrUnexpectedEOF) {
			c.refuse(c.at(0, Truncated, "the compressed file ends early: what came before this line is kept; fetch the file again"))
			c.done = true
			break
		}
		if err != nil {
			return fmt.Errorf("%s:%d: %w", c.options.Name, c.line, err)
		}
		at, f := c.parse(line)
		switch {
		case f == nil && at == blank:
		case f == nil:
			b.At = append(b.At, at)
			for i, v := range c.values {
				b.Channels[i].Mean = append(b.Channels[i].Mean, v)
			}
		case !ended:
			detail := "the last line ends early: what came before it is kept; fetch the file again"
			if f.Reason != BadFields {
				detail += " (" + f.Detail + ")"
			}
			c.refuse(c.at(0, Truncated, detail))
		default:
			c.refuse(f)
		}
	}
	if len(b.At) == 0 {
		return io.EOF
	}
	c.rows += int64(len(b.At))
	return nil
}

func (c *CSV) prepare(b *minute.Batch) {
	same := len(b.Channels) == len(c.channels)
	for i := 0; same && i < len(c.channels); i++ {
		same = b.Channels[i].Name == c.channels[i] && b.Channels[i].Stats == nil
	}
	if !same {
		b.Channels = make([]minute.Channel, len(c.channels))
	}
	for i := range b.Channels {
		b.Channels[i].Name, b.Channels[i].Mean = c.channels[i], b.Channels[i].Mean[:0]
	}
	b.Station, b.At, b.Received, b.Ahead = c.options.Station, b.At[:0], nil, nil
}

func (c *CSV) refuse(r *LineRefusal) {
	if c.count++; len(c.refused) < RefusalsKeptMax {
		c.refused = append(c.refused, *r)
	}
}

// blank is the stamp that parse gives for a line without anything on it. No time of a file can be it.
const blank = minute.Stamp(math.MinInt64)
