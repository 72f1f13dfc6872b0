// Package table is what stands inside the archive's files: the columns with their units, how rows are rounded, the digest of a
// station-day's rows, and tables as Parquet. It is the only package that knows Parquet.
package table

import (
	"encoding/json"
	"fmt"
	"io"
	"math"
	"reflect"
	"slices"
	"sync"

	"github.com/parquet-go/parquet-go"
)

// A Kind is the type of a column's values.
type Kind uint8

// The kinds. Times are microseconds since 1970, UTC.
const (
	Time Kind = iota
	Double
	Int
	Text
	Bool
)

// A Column says what a column holds. StandardName is the CF one, empty where CF has none.
type Column struct {
	Name, Unit, StandardName, Description string
	Kind                                  Kind
	Step                                  float64 // resolution that values are rounded to; 0 keeps them as they are
	Required                              bool    // never null
}

// NullInt stands for a null in Ints, NullTime in Times, NullCode in Codes. In Doubles it is NaN.
const (
	NullInt  = math.MinInt32
	NullTime = math.MinInt64
	NullCode = -1
)

// A Vector is a column's values; the slice of its kind is as long as the table, or nil if all values are null.
type Vector struct {
	Times   []int64
	Doubles []float64
	Ints    []int32
	Codes   []int32 // of Dict
	Dict    []string
	Bools   []bool
}

// A Table is rows in columns.
type Table struct {
	Columns []Column
	Vectors []Vector
	Rows    int
	Meta    map[string]string
}

// Find gives the vector of a column, nil if there is none of that name.
func (t *Table) Find(name string) *Vector {
	for i := range t.Columns {
		if t.Columns[i].Name == name {
			return &t.Vectors[i]
		}
	}
	return nil
}

// ordered is a group whose fields keep their order; the library's own sorts them by name.
type ordered struct {
	parquet.Group
	fields []parquet.Field
}

func (o ordered) Fields() []parquet.Field { return o.fields }

type field struct {
	parquet.Node
	name string
}

func (f field) Name() string                           { return f.name }
func (f field) Value(base reflect.Value) reflect.Value { return base.MapIndex(reflect.ValueOf(f.name)) }

func (c *Column) node() parquet.Node {
	var n parquet.Node
	switch c.Kind {
	case Time:
		n = parquet.Encoded(parquet.Timestamp(parquet.Microsecond), &parquet.DeltaBinaryPacked)
	case Double:
		n = parquet.Encoded(parquet.Leaf(parquet.DoubleType), &parquet.ByteStreamSplit)
	case Int:
		n = parquet.Encoded(parquet.Int(32), &parquet.Plain)
	case Text:
		n = parquet.Encoded(parquet.String(), &parquet.RLEDictionary)
	case Bool:
		n = parquet.Leaf(parquet.BooleanType)
	}
	if !c.Required {
		n = parquet.Optional(n)
	}
	return n
}

func schemaOf(columns []Column) *parquet.Schema {
	o := ordered{Group: parquet.Group{}}
	for i := range columns {
		n := columns[i].node()
		o.Group[columns[i].Name] = n
		o.fields = append(o.fields, field{n, columns[i].Name})
	}
	return parquet.NewSchema("row", o)
}

// described is what the metadata `columns` says of a column.
type described struct {
	Name         string  `json:"name"`
	Unit         string  `json:"unit,omitempty"`
	StandardName string  `json:"standard_name,omitempty"`
	Description  string  `json:"long_name,omitempty"`
	Step         float64 `json:"resolution,omitempty"`
}

var describedCache sync.Map // of *Column to string: the minutes' list is long and always the same

func describe(columns []Column) string {
	if s, ok := describedCache.Load(&columns[0]); ok {
		return s.(string)
	}
	list := make([]described, len(columns))
	for i, c := range columns {
		list[i] = described{c.Name, c.Unit, c.StandardName, c.Description, c.Step}
	}
	b, _ := json.Marshal(list)
	if &columns[0] == &minuteColumns[0] {
		describedCache.Store(&columns[0], string(b))
	}
	return string(b)
}

// Meta reads the key-value metadata and the number of rows of a file.
func Meta(r io.ReaderAt, size int64) (meta map[string]string, rows int, err error) {
	err = guard(func() error {
		f, err := open(r, size)
		if err != nil {
			return err
		}
		meta, rows = metaOf(f), int(f.NumRows())
		return nil
	})
	return meta, rows, err
}

func metaOf(f *parquet.File) map[string]string {
	m := map[string]string{}
	for _, kv := range f.Metadata().KeyValueMetadata {
		m[kv.Key] = kv.Value
	}
	return m
}

func open(r io.ReaderAt, size int64) (*parquet.File, error) {
	return parquet.OpenFile(r, size, parquet.SkipBloomFilters(true), parquet.SkipPageIndex(true))
}

// guard turns a panic into an error: headers of Parquet pages carry no checksum, and a damaged one can make the reader panic.
func guard(f func() error) (err error) {
	defer func() {
		if p := recover(); p != nil {
			err = fmt.Errorf("not a readable parquet file: %v", p)
		}
	}()
	return f()
}

// Read reads the columns named, in the order of the file; nil reads all of them. Columns that the file lacks are left out.
func Read(r io.ReaderAt, size int64, want []string) (t *Table, err error) {
	err = guard(func() error {
		f, err := open(r, size)
		if err != nil {
			return err
		}
		t, err = readTable(f, want)
		return err
	})
	return t, err
}

func readTable(f *parquet.File, want []string) (*Table, error) {
	t := &Table{Rows: int(f.NumRows()), Meta: metaOf(f)}
	by := describedBy(t.Meta["columns"])
	for i, fd := range f.Schema().Fields() {
		if want != nil && !slices.Contains(want, fd.Name()) {
			continue
		}
		kind, err := kindOf(fd)
		if err != nil {
			return nil, err
		}
		d := by[fd.Name()]
		c := Column{Name: fd.Name(), Unit: d.Unit, StandardName: d.StandardName, Description: d.Description, Step: d.Step,
			Kind: kind, Required: !fd.Optional()}
		v, err := readColumn(f, i, &c, t.Rows)
		if err != nil {
			return nil, fmt.Errorf("column %s: %w", c.Name, err)
		}
		t.Columns, t.Vectors = append(t.Columns, c), append(t.Vectors, v)
	}
	return t, nil
}

// Described lists what a file's metadata say of its columns; their kinds are not among it.
func Described(meta map[string]string) []Column {
	var list []described
	_ = json.Unmarshal([]byte(meta["columns"]), &list) // a foreign file says nothing
	columns := make([]Column, len(list))
	for i, d := range list {
		columns[i] = Column{Name: d.Name, Unit: d.Unit, StandardName: d.StandardName, Description: d.Description, Step: d.Step}
	}
	return columns
}

// lastDescribed keeps what was parsed last: files of one table say the same of their columns.
var lastDescribed struct {
	sync.Mutex
	text string
	by   map[string]described
}

// describedBy parses the metadata `columns`; a foreign file has none, then only names and kinds are known.
func describedBy(text string) map[string]described {
	lastDescribed.Lock()
	defer lastDescribed.Unlock()
	if lastDescribed.by == nil || lastDescribed.text != text {
		var list []described
		_ = json.Unmarshal([]byte(text), &list)
		by := map[string]described{}
		for _, d := range list {
			by[d.Name] = d
		}
		lastDescribed.text, lastDescribed.by = text, by
	}
	return lastDescribed.by
}

func kindOf(fd parquet.Field) (Kind, error) {
	if fd.Leaf() && !fd.Repeated() {
		switch fd.Type().Kind() {
		case parquet.Int64:
			return Time, nil
		case parquet.Double:
			return Double, nil
		case parquet.Int32:
			return Int, nil
		case parquet.ByteArray:
			return Text, nil
		case parquet.Boolean:
			return Bool, nil
		}
	}
	return 0, fmt.Errorf("column %s: a type that no table of the archive has", fd.Name())
}

func readColumn(f *parquet.File, index int, c *Column, rows int) (Vector, error) {
	b := builder{kind: c.Kind, rows: rows}
	for k, g := range f.RowGroups() {
		meta := &f.Metadata().RowGroups[k].Columns[index].MetaData
		if n := meta.NumValues; n > 0 && meta.Statistics.NullCount == n && int64(b.n)+n <= int64(rows) {
			b.n += int(n)
			continue
		}
		if err := b.chunk(g.ColumnChunks()[index]); err != nil {
			return Vector{}, err
		}
	}
	if b.n != rows {
		return Vector{}, fmt.Errorf("%d values for %d rows", b.n, rows)
	}
	return b.v, nil
}

type builder struct {
	kind Kind
	rows int
	n    int // values taken
	v    Vector
	dict map[string]int32
}

func (b *builder) chunk(c parquet.ColumnChunk) error {
	pages := c.Pages()
	defer pages.Close()
	for {
		p, err := pages.ReadPage()
		if err == io.EOF {
			return nil
		}
		if err != nil {
			return err
		}
		if b.n+int(p.NumValues()) > b.rows {
			return fmt.Errorf("more values than rows")
		}
		err = b.page(p)
		parquet.Release(p)
		if err != nil {
			return err
		}
	}
}

func (b *builder) page(p parquet.Page) error {
	n := int(p.NumValues())
	if int(p.NumNulls()) == n {
		b.n += n // while there is nothing but nulls the vector stays nil
		return nil
	}
	b.make()
	if data := p.Data(); p.Dictionary() == nil {
		levels := p.DefinitionLevels()
		switch b.kind {
		case Double:
			return spread(b, b.v.Doubles, data.Double(), levels, n)
		case Time:
			return spread(b, b.v.Times, data.Int64(), levels, n)
		case Int:
			return spread(b, b.v.Ints, data.Int32(), levels, n)
		}
	}
	if b.kind == Text && p.Dictionary() != nil {
		return b.coded(p, n)
	}
	return b.each(p)
}

// coded takes a page of texts as codes of its dictionary.
func (b *builder) coded(p parquet.Page, n int) error {
	d := p.Dictionary()
	to := make([]int32, d.Len())
	for i := range to {
		to[i] = b.code(string(d.Index(int32(i)).ByteArray()))
	}
	data := p.Data()
	codes := data.Int32()
	mapped := make([]int32, len(codes))
	for i, c := range codes {
		mapped[i] = to[c]
	}
	return spread(b, b.v.Codes, mapped, p.DefinitionLevels(), n)
}

func (b *builder) code(s string) int32 {
	code, ok := b.dict[s]
	if !ok {
		code = int32(len(b.v.Dict))
		b.v.Dict = append(b.v.Dict, s)
		b.dict[s] = code
	}
	return code
}

// spread puts a page's values, which are only those that are not null, into their rows.
func spread[T any](b *builder, out, values []T, levels []byte, n int) error {
	out = out[b.n : b.n+n]
	b.n += n
	if len(levels) == 0 || len(values) == n {
		if len(values) != n {
			return fmt.Errorf("%d values for %d rows", len(values), n)
		}
		copy(out, values)
		return nil
	}
	if len(levels) != n {
		return fmt.Errorf("%d levels for %d rows", len(levels), n)
	}
	k := 0
	for i, l := range levels {
		if l == 0 {
			continue
		}
		if k == len(values) {
			return fmt.Errorf("%d values for more rows", len(values))
		}
		out[i] = values[k]
		k++
	}
	return nil
}

// each takes the values one by one.
func (b *builder) each(p parquet.Page) error {
	values := make([]parquet.Value, 1024)
	r := p.Values()
	for {
		n, err := r.ReadValues(values)
		for _, v := range values[:n] {
			b.put(v)
		}
		if err == io.EOF {
			return nil
		}
		if err != nil {
			return err
		}
	}
}

// make makes the vector, all null, when the first value comes.
func (b *builder) make() {
	switch {
	case b.kind == Time && b.v.Times == nil:
		b.v.Times = filled[int64](b.rows, NullTime)
	case b.kind == Double && b.v.Doubles == nil:
		b.v.Doubles = filled(b.rows, math.NaN())
	case b.kind == Int && b.v.Ints == nil:
		b.v.Ints = filled[int32](b.rows, NullInt)
	case b.kind == Text && b.v.Codes == nil:
		b.v.Codes = filled[int32](b.rows, NullCode)
		b.dict = map[string]int32{}
	case b.kind == Bool && b.v.Bools == nil:
		b.v.Bools = make([]bool, b.rows)
	}
}

func filled[T any](n int, x T) []T {
	s := make([]T, n)
	for i := range s {
		s[i] = x
	}
	return s
}

func (b *builder) put(v parquet.Value) {
	i := b.n
	b.n++
	if v.IsNull() {
		return
	}
	switch b.kind {
	case Time:
		b.v.Times[i] = v.Int64()
	case Double:
		b.v.Doubles[i] = v.Double()
	case Int:
		b.v.Ints[i] = v.Int32()
	case Text:
		b.v.Codes[i] = b.code(string(v.ByteArray()))
	case Bool:
		b.v.Bools[i] = v.Boolean()
	}
}
