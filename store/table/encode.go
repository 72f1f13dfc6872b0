package table

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"hash/crc32"
	"io"
	"maps"
	"math"
	"runtime"
	"slices"
	"strings"
	"sync"

	"github.com/klauspost/compress/zstd"
	"github.com/parquet-go/parquet-go"
	"github.com/parquet-go/parquet-go/encoding/delta"
	"github.com/parquet-go/parquet-go/encoding/rle"
	"github.com/parquet-go/parquet-go/encoding/thrift"
	"github.com/parquet-go/parquet-go/format"
)

// RowGroupRows is how many rows a row group holds at most. A column of a row group is one page.
const RowGroupRows = 131072

// A Writer writes tables of the same columns, one file after the other, and reuses its buffers. It is for one goroutine.
//
// The library's writers take values one by one, 24 bytes each, which for a hundred columns of a minute is most of the time of a commit. Here the pages are
// built of whole columns; schema, encodings and the footer's form are the library's, and every file is read back through it in the tests.
type Writer struct {
	meta   format.FileMetaData // schema and column orders
	thrift thrift.CompactProtocol

	out     []byte
	page    []byte
	longs   []int64
	ints    []int32
	doubles []float64
}

// compressor is shared: EncodeAll may be called by several goroutines. The fastest level is 10 % larger than the default and twice as fast.
var compressor = func() *zstd.Encoder {
	e, err := zstd.NewWriter(nil, zstd.WithEncoderLevel(zstd.SpeedFastest), zstd.WithEncoderConcurrency(runtime.GOMAXPROCS(0)), zstd.WithEncoderCRC(false))
	if err != nil {
		panic(err) // the options are constants
	}
	return e
}()

// NewWriter makes a writer for these columns.
func NewWriter(columns []Column) *Writer {
	var b bytes.Buffer
	// An empty file by the library has the schema in the library's words.
	if err := parquet.NewWriter(&b, schemaOf(columns)).Close(); err != nil {
		panic(err) // a buffer in memory takes everything
	}
	f, err := parquet.OpenFile(bytes.NewReader(b.Bytes()), int64(b.Len()))
	if err != nil {
		panic(err)
	}
	m := f.Metadata()
	return &Writer{meta: format.FileMetaData{Version: m.Version, Schema: m.Schema, ColumnOrders: m.ColumnOrders,
		CreatedBy: "fluxwarden version 1 (build 1)"}}
}

// Write writes the table, whose columns must be the writer's, as one whole file.
func (w *Writer) Write(out io.Writer, t *Table) error {
	if len(t.Columns) != len(w.meta.Schema)-1 || len(t.Vectors) != len(t.Columns) {
		return fmt.Errorf("table of %d columns, the writer has %d", len(t.Columns), len(w.meta.Schema)-1)
	}
	w.out = append(w.out[:0], "PAR1"...)
	m := w.meta
	m.NumRows, m.RowGroups, m.KeyValueMetadata = int64(t.Rows), nil, nil
	for _, k := range slices.Sorted(maps.Keys(t.Meta)) {
		m.KeyValueMetadata = append(m.KeyValueMetadata, format.KeyValue{Key: k, Value: t.Meta[k]})
	}
	m.KeyValueMetadata = append(m.KeyValueMetadata, format.KeyValue{Key: "columns", Value: describe(t.Columns)})
	for from := 0; from < t.Rows; from += RowGroupRows {
		g, err := w.rowGroup(t, from, min(from+RowGroupRows, t.Rows))
		if err != nil {
			return err
		}
		g.Ordinal = int16(len(m.RowGroups))
		m.RowGroups = append(m.RowGroups, g)
	}
	footer, err := thrift.Marshal(&w.thrift, &m)
	if err != nil {
		return err
	}
	w.out = append(w.out, footer...)
	w.out = binary.LittleEndian.AppendUint32(w.out, uint32(len(footer)))
	w.out = append(w.out, "PAR1"...)
	_, err = out.Write(w.out)
	return err
}

func (w *Writer) rowGroup(t *Table, from, to int) (format.RowGroup, error) {
	g := format.RowGroup{NumRows: int64(to - from), FileOffset: int64(len(w.out)), Columns: make([]format.ColumnChunk, len(t.Columns))}
	if t.Columns[0].Kind == Time && t.Columns[0].Required {
		g.SortingColumns = []format.SortingColumn{{ColumnIdx: 0}}
	}
	for i := range t.Columns {
		meta, err := w.chunk(&t.Columns[i], &t.Vectors[i], from, to)
		if err != nil {
			return g, fmt.Errorf("column %s: %w", t.Columns[i].Name, err)
		}
		g.Columns[i].MetaData = meta
		g.TotalByteSize += meta.TotalUncompressedSize
		g.TotalCompressedSize += meta.TotalCompressedSize
	}
	return g, nil
}

// chunk appends a column's pages to the file.
func (w *Writer) chunk(c *Column, v *Vector, from, to int) (format.ColumnMetaData, error) {
	m := format.ColumnMetaData{PathInSchema: []string{c.Name}, Codec: format.Zstd, NumValues: int64(to - from), Type: typeOf(c.Kind)}
	start := len(w.out)
	body, encoding, nulls, err := w.body(c, v, from, to)
	if err != nil {
		return m, err
	}
	if nulls == to-from {
		m.Codec = format.Uncompressed // a few bytes, which compression makes more
	} else if c.Kind == Text {
		dict := w.dictionary(v.Dict)
		m.DictionaryPageOffset = int64(start)
		header := format.PageHeader{Type: format.DictionaryPage,
			DictionaryPageHeader: thrift.New(format.DictionaryPageHeader{NumValues: int32(len(v.Dict)), Encoding: format.Plain})}
		if err := w.append(&m, &header, dict); err != nil {
			return m, err
		}
		m.Encoding = append(m.Encoding, format.Plain)
	}
	m.DataPageOffset = int64(len(w.out))
	m.Encoding = append(m.Encoding, encoding, format.RLE)
	m.Statistics.NullCount = int64(nulls)
	if c.Kind == Time && nulls < to-from {
		m.Statistics.MinValue, m.Statistics.MaxValue = bounds(v.Times[from:to])
	}
	header := format.PageHeader{Type: format.DataPage, DataPageHeader: thrift.New(format.DataPageHeader{NumValues: int32(to - from), Encoding: encoding,
		DefinitionLevelEncoding: format.RLE, RepetitionLevelEncoding: format.RLE, Statistics: m.Statistics})}
	err = w.append(&m, &header, body)
	m.TotalCompressedSize = int64(len(w.out) - start)
	return m, err
}

func typeOf(k Kind) format.Type {
	return [...]format.Type{Time: format.Int64, Double: format.Double, Int: format.Int32, Text: format.ByteArray, Bool: format.Boolean}[k]
}

// append appends one page with its header.
func (w *Writer) append(m *format.ColumnMetaData, h *format.PageHeader, body []byte) error {
	data := body
	if m.Codec == format.Zstd {
		w.page = compressor.EncodeAll(body, w.page[:0])
		data = w.page
	}
	h.UncompressedPageSize, h.CompressedPageSize, h.CRC = int32(len(body)), int32(len(data)), int32(crc32.ChecksumIEEE(data))
	header, err := thrift.Marshal(&w.thrift, h)
	if err != nil {
		return err
	}
	w.out = append(append(w.out, header...), data...)
	m.TotalUncompressedSize += int64(len(header) + len(body))
	return nil
}

func bounds(times []int64) (lo, hi []byte) {
	a, b := int64(math.MaxInt64), int64(math.MinInt64)
	for _, x := range times {
		if x != NullTime {
			a, b = min(a, x), max(b, x)
		}
	}
	return binary.LittleEndian.AppendUint64(nil, uint64(a)), binary.LittleEndian.AppendUint64(nil, uint64(b))
}

func (w *Writer) dictionary(dict []string) []byte {
	var b []byte
	for _, s := range dict {
		b = binary.LittleEndian.AppendUint32(b, uint32(len(s)))
		b = append(b, s...)
	}
	return b
}

// body gives a data page's bytes: levels that say which rows are null, then the values of the others.
func (w *Writer) body(c *Column, v *Vector, from, to int) (body []byte, encoding format.Encoding, nulls int, err error) {
	n := to - from
	b := w.levelsFor(c, v, from, to, &nulls)
	if nulls == n {
		return b, format.Plain, nulls, nil
	}
	if c.Required && nulls > 0 {
		return nil, 0, 0, fmt.Errorf("%d nulls in a column that has none", nulls)
	}
	switch c.Kind {
	case Double:
		return w.split(b, v.Doubles[from:to], n-nulls), format.ByteStreamSplit, nulls, nil
	case Int:
		for _, x := range v.Ints[from:to] {
			if x != NullInt {
				b = binary.LittleEndian.AppendUint32(b, uint32(x))
			}
		}
		return b, format.Plain, nulls, nil
	case Time:
		w.longs = w.longs[:0]
		for _, x := range v.Times[from:to] {
			if x != NullTime {
				w.longs = append(w.longs, x)
			}
		}
		e, err := new(delta.BinaryPackedEncoding).EncodeInt64(nil, w.longs)
		return append(b, e...), format.DeltaBinaryPacked, nulls, err
	case Text:
		w.ints = w.ints[:0]
		for _, x := range v.Codes[from:to] {
			if x != NullCode {
				w.ints = append(w.ints, x)
			}
		}
		e, err := new(rle.DictionaryEncoding).EncodeInt32(nil, w.ints)
		return append(b, e...), format.RLEDictionary, nulls, err
	}
	bits := make([]byte, (n+7)/8)
	for i, x := range v.Bools[from:to] {
		if x {
			bits[i/8] |= 1 << (i % 8)
		}
	}
	return append(b, bits...), format.Plain, nulls, nil
}

// split writes byte k of every value, then byte k+1 of every value, and so on: the bytes of a slowly changing column compress best so.
func (w *Writer) split(b []byte, values []float64, n int) []byte {
	if n != len(values) {
		w.doubles = w.doubles[:0]
		for _, x := range values {
			if isValue(x) {
				w.doubles = append(w.doubles, x)
			}
		}
		values = w.doubles
	}
	start := len(b)
	b = slices.Grow(b, 8*n)[:start+8*n]
	s := b[start:]
	s0, s1, s2, s3 := s[:n:n], s[n:2*n:2*n], s[2*n:3*n:3*n], s[3*n:4*n:4*n]
	s4, s5, s6, s7 := s[4*n:5*n:5*n], s[5*n:6*n:6*n], s[6*n:7*n:7*n], s[7*n:8*n:8*n]
	for i, x := range values[:n] {
		u := math.Float64bits(x)
		s0[i], s1[i], s2[i], s3[i] = byte(u), byte(u>>8), byte(u>>16), byte(u>>24)
		s4[i], s5[i], s6[i], s7[i] = byte(u>>32), byte(u>>40), byte(u>>48), byte(u>>56)
	}
	return b
}

// isValue says whether a double is stored: NaN and the infinities are nulls.
func isValue(x float64) bool { return x-x == 0 }

// writersKept is how many sets of columns have writers kept for them; a station's channels seldom change.
const writersKept = 4096

var writers struct {
	sync.Mutex
	of map[string]*sync.Pool
}

// Encode writes a table as one file. Writers are kept by their columns.
func Encode(t *Table) ([]byte, error) {
	pool := writersOf(t.Columns)
	w := pool.Get().(*Writer)
	var b bytes.Buffer
	if err := w.Write(&b, t); err != nil {
		return nil, err // the writer is not put back: its state is not known
	}
	pool.Put(w)
	return b.Bytes(), nil
}

func writersOf(columns []Column) *sync.Pool {
	var key strings.Builder
	for _, c := range columns {
		fmt.Fprintf(&key, "%s\x00%d%t,", c.Name, c.Kind, c.Required)
	}
	writers.Lock()
	defer writers.Unlock()
	p := writers.of[key.String()]
	if p == nil {
		columns = slices.Clone(columns)
		p = &sync.Pool{New: func() any { return NewWriter(columns) }}
		if writers.of == nil || len(writers.of) >= writersKept {
			writers.of = map[string]*sync.Pool{}
		}
		writers.of[key.String()] = p
	}
	return p
}
