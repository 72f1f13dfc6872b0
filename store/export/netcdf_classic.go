package export

import (
	"bufio"
	"encoding/binary"
	"fmt"
	"io"
	"math"
)

// This file writes the classic form of NetCDF with 64-bit offsets (CDF-2), after the format's specification by Unidata: big-endian, a header with
// lists of dimensions, attributes and variables, then the variables without the record dimension, then the records. It is the form that every
// reader knows.

type ncType int32

const (
	ncByte   ncType = 1
	ncChar   ncType = 2
	ncInt    ncType = 4
	ncDouble ncType = 6
)

func (t ncType) size() int { return map[ncType]int{ncByte: 1, ncChar: 1, ncInt: 4, ncDouble: 8}[t] }

// What stands for a value that is not there. Bytes have -127, as the format's own fill.
const (
	fillByte   = int8(-127)
	fillInt    = int32(math.MinInt32)
	fillDouble = 9.9692099683868690e36
)

// An ncAttribute's value is a string, []int8, []int32 or []float64.
type ncAttribute struct {
	name  string
	value any
}

type ncDimension struct {
	name   string
	length int // 0 is the record dimension
}

type ncVariable struct {
	name       string
	dimensions []int
	attributes []ncAttribute
	kind       ncType
	data       []byte // of one without the record dimension
}

func (v *ncVariable) set(name string, value any) {
	if s, ok := value.(string); ok && s == "" {
		return
	}
	v.attributes = append(v.attributes, ncAttribute{name, value})
}

// An ncFile is the header of a file and the values that do not grow with the records.
type ncFile struct {
	dimensions []ncDimension
	attributes []ncAttribute
	variables  []ncVariable
	records    int
}

const (
	tagDimension = 0x0A
	tagVariable  = 0x0B
	tagAttribute = 0x0C
)

func padded(n int) int { return (n + 3) &^ 3 }

func (f *ncFile) isRecord(v *ncVariable) bool {
	return len(v.dimensions) > 0 && f.dimensions[v.dimensions[0]].length == 0
}

// sizeOf is the bytes of a variable, or of its part of one record, padded.
func (f *ncFile) sizeOf(v *ncVariable) int {
	n := v.kind.size()
	for _, d := range v.dimensions {
		if l := f.dimensions[d].length; l > 0 {
			n *= l
		}
	}
	return padded(n)
}

type ncHeader struct{ b []byte }

func (h *ncHeader) int(n int) { h.b = binary.BigEndian.AppendUint32(h.b, uint32(n)) }

func (h *ncHeader) name(s string) {
	h.int(len(s))
	h.pad([]byte(s))
}

func (h *ncHeader) pad(data []byte) {
	h.b = append(h.b, data...)
	for len(h.b)%4 != 0 {
		h.b = append(h.b, 0)
	}
}

func (h *ncHeader) list(tag, n int) {
	if n == 0 {
		tag = 0
	}
	h.int(tag)
	h.int(n)
}

func (h *ncHeader) attributes(list []ncAttribute) {
	h.list(tagAttribute, len(list))
	for _, a := range list {
		h.name(a.name)
		switch v := a.value.(type) {
		case string:
			h.int(int(ncChar))
			h.int(len(v))
			h.pad([]byte(v))
		case []int8:
			h.int(int(ncByte))
			h.int(len(v))
			b := make([]byte, len(v))
			for i, x := range v {
				b[i] = byte(x)
			}
			h.pad(b)
		case []int32:
			h.int(int(ncInt))
			h.int(len(v))
			for _, x := range v {
				h.int(int(x))
			}
		case []float64:
			h.int(int(ncDouble))
			h.int(len(v))
			for _, x := range v {
				h.b = binary.BigEndian.AppendUint64(h.b, math.Float64bits(x))
			}
		default:
			panic("netcdf: an attribute of a type without a form")
		}
	}
}

// header gives the bytes before the data.
func (f *ncFile) header() []byte {
	size := len(f.headerAt(0))
	return f.headerAt(size)
}

func (f *ncFile) headerAt(size int) []byte {
	h := &ncHeader{b: []byte{'C', 'D', 'F', 2}}
	h.int(f.records)
	h.list(tagDimension, len(f.dimensions))
	for _, d := range f.dimensions {
		h.name(d.name)
		h.int(d.length)
	}
	h.attributes(f.attributes)
	h.list(tagVariable, len(f.variables))
	fixed, record := size, size
	for i := range f.variables {
		if v := &f.variables[i]; !f.isRecord(v) {
			record += f.sizeOf(v)
		}
	}
	for i := range f.variables {
		v := &f.variables[i]
		h.name(v.name)
		h.int(len(v.dimensions))
		for _, d := range v.dimensions {
			h.int(d)
		}
		h.attributes(v.attributes)
		h.int(int(v.kind))
		h.int(f.sizeOf(v))
		at := &fixed
		if f.isRecord(v) {
			at = &record
		}
		h.b = binary.BigEndian.AppendUint64(h.b, uint64(*at))
		*at += f.sizeOf(v)
	}
	return h.b
}

// An ncWriter writes a file record by record, each with the record variables in their order.
type ncWriter struct {
	out     *bufio.Writer
	buffer  []byte
	written int
	want    int
}

// begin writes the header and what does not grow. The record variables must be more than one: a single one would not be padded.
func (f *ncFile) begin(w io.Writer) (*ncWriter, error) {
	records := 0
	for i := range f.variables {
		if f.isRecord(&f.variables[i]) {
			records++
		}
	}
	if records == 1 {
		return nil, fmt.Errorf("netcdf: a file with one record variable has another form")
	}
	out := bufio.NewWriterSize(w, 1<<18)
	if _, err := out.Write(f.header()); err != nil {
		return nil, err
	}
	for i := range f.variables {
		v := &f.variables[i]
		if f.isRecord(v) {
			continue
		}
		data := v.data
		for len(data) < f.sizeOf(v) {
			data = append(data, 0)
		}
		if _, err := out.Write(data); err != nil {
			return nil, err
		}
	}
	return &ncWriter{out: out, want: f.records}, nil
}

func (w *ncWriter) double(x float64) {
	if x != x || math.IsInf(x, 0) {
		x = fillDouble
	}
	w.buffer = binary.BigEndian.AppendUint64(w.buffer, math.Float64bits(x))
}

func (w *ncWriter) int(x int32) { w.buffer = binary.BigEndian.AppendUint32(w.buffer, uint32(x)) }

func (w *ncWriter) byte(x int8) {
	const pad = 0x81 // the fill of bytes
	w.buffer = append(w.buffer, byte(x), pad, pad, pad)
}

// next ends a record.
func (w *ncWriter) next() error {
	w.written++
	_, err := w.out.Write(w.buffer)
	w.buffer = w.buffer[:0]
	return err
}

func (w *ncWriter) end() error {
	if w.written != w.want {
		return fmt.Errorf("netcdf: %d records written, the header says %d: the archive has changed meanwhile; export again", w.written, w.want)
	}
	return w.out.Flush()
}

func doubleBytes(x float64) []byte { return binary.BigEndian.AppendUint64(nil, math.Float64bits(x)) }
