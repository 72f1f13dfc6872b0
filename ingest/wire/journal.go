package wire

import (
	"encoding/binary"
	"errors"
	"fmt"
	"hash/crc32"
	"math"
	"sync"

	"fluxwarden/qc/minute"
)

// A Group is readings of one station, in the order in which the gate took them.
type Group struct {
	Station  string
	Readings []minute.Reading
}

// JournalVersion is the first byte of a journal frame.
//
// Behind it stand a CRC-32C of the rest (four bytes, little endian), the number of channel names and the names, then the
// number of groups and the groups: station, number of readings, readings. A reading is the steps of At and Received
// from the reading before, flags, the number of values and the values. A value is its channel's place in the list, doubled, plus one where
// it has statistics; the mean; and with statistics a byte that says which are there, those, and n. Numbers are varints,
// floats eight bytes little endian, names have their length before them.
const JournalVersion = 1

const (
	journalHeaderBytes = 5
	flagAhead          = 1
	hasSD, hasMin      = 1, 2
	hasMax             = 4
)

// ErrJournal is what every error of DecodeJournal wraps: the frame is damaged or of a version not known here.
var ErrJournal = errors.New("journal frame")

var castagnoli = crc32.MakeTable(crc32.Castagnoli)

// AppendJournal appends a frame with the groups to dst.
func AppendJournal(dst []byte, groups []Group) []byte {
	begin := len(dst)
	dst = append(dst, JournalVersion, 0, 0, 0, 0)
	places := make(map[string]uint64)
	var names []string
	for g := range groups {
		for r := range groups[g].Readings {
			for _, v := range groups[g].Readings[r].Values {
				if _, ok := places[v.Channel]; !ok {
					places[v.Channel] = uint64(len(names))
					names = append(names, v.Channel)
				}
			}
		}
	}
	dst = binary.AppendUvarint(dst, uint64(len(names)))
	for _, n := range names {
		dst = appendName(dst, n)
	}
	dst = binary.AppendUvarint(dst, uint64(len(groups)))
	for g := range groups {
		dst = appendName(dst, groups[g].Station)
		dst = binary.AppendUvarint(dst, uint64(len(groups[g].Readings)))
		var at, received minute.Stamp
		for i := range groups[g].Readings {
			r := &groups[g].Readings[i]
			dst = binary.AppendVarint(dst, int64(r.At-at))
			dst = binary.AppendVarint(dst, int64(r.Received-received))
			at, received = r.At, r.Received
			dst = appendJournalValues(dst, r, places)
		}
	}
	binary.LittleEndian.PutUint32(dst[begin+1:], crc32.Checksum(dst[begin+journalHeaderBytes:], castagnoli))
	return dst
}

func appendName(dst []byte, s string) []byte {
	return append(binary.AppendUvarint(dst, uint64(len(s))), s...)
}

func appendFloat(dst []byte, v float64) []byte {
	return binary.LittleEndian.AppendUint64(dst, math.Float64bits(v))
}

func appendJournalValues(dst []byte, r *minute.Reading, places map[string]uint64) []byte {
	var flags byte
	if r.Ahead {
		flags |= flagAhead
	}
	dst = append(dst, flags)
	dst = binary.AppendUvarint(dst, uint64(len(r.Values)))
	for i := range r.Values {
		v := &r.Values[i]
		place := places[v.Channel] * 2
		if single(&v.Value) {
			dst = appendFloat(binary.AppendUvarint(dst, place), v.Mean)
			continue
		}
		dst = appendFloat(binary.AppendUvarint(dst, place+1), v.Mean)
		at := len(dst)
		dst = append(dst, 0)
		for k, part := range [...]float64{v.SD, v.Min, v.Max} {
			if !math.IsNaN(part) {
				dst[at] |= 1 << k
				dst = appendFloat(dst, part)
			}
		}
		dst = binary.AppendUvarint(dst, uint64(v.N))
	}
	return dst
}

// DecodeJournal reads a frame. Every count in it is held against the bytes that are left, so that damaged or hostile
// input allocates no more than a small multiple of its own size.
func DecodeJournal(frame []byte) ([]Group, error) {
	if len(frame) < journalHeaderBytes {
		return nil, fmt.Errorf("%w: %d bytes: shorter than its header", ErrJournal, len(frame))
	}
	if frame[0] != JournalVersion {
		return nil, fmt.Errorf("%w: version %d: this program reads version %d", ErrJournal, frame[0], JournalVersion)
	}
	body := frame[journalHeaderBytes:]
	if want, got := binary.LittleEndian.Uint32(frame[1:]), crc32.Checksum(body, castagnoli); want != got {
		return nil, fmt.Errorf("%w: checksum is %08x, not %08x: the frame is damaged", ErrJournal, got, want)
	}
	interner := journalNames.Get().(*interner)
	defer journalNames.Put(interner)
	r := frameReader{b: body, interner: interner}
	groups := r.groups()
	if r.bad == "" && len(r.b) != 0 {
		r.bad = fmt.Sprintf("%d bytes too many", len(r.b))
	}
	if r.bad != "" {
		return nil, fmt.Errorf("%w: %s", ErrJournal, r.bad)
	}
	return groups, nil
}

var journalNames = sync.Pool{New: func() any { return new(interner) }}

// A frameReader takes a frame's body apart. After the first thing wrong, bad says so and everything else reads as zero.
type frameReader struct {
	b        []byte
	bad      string
	interner *interner
	channels []string
}

func (r *frameReader) groups() []Group {
	r.channels = make([]string, r.count(1, "channels"))
	for i := range r.channels {
		r.channels[i] = r.name()
	}
	groups := make([]Group, r.count(2, "groups"))
	for g := range groups {
		groups[g].Station = r.name()
		groups[g].Readings = make([]minute.Reading, r.count(4, "readings"))
		var at, received minute.Stamp
		for i := range groups[g].Readings {
			at += minute.Stamp(r.varint())
			received += minute.Stamp(r.varint())
			groups[g].Readings[i] = minute.Reading{At: at, Received: received, Ahead: r.byte()&flagAhead != 0, Values: r.values()}
			if r.bad != "" {
				return nil
			}
		}
	}
	return groups
}

func (r *frameReader) values() []minute.ChannelValue {
	n := r.count(9, "values")
	if n == 0 {
		return nil
	}
	values := make([]minute.ChannelValue, n)
	for i := range values {
		place := r.uvarint()
		if place/2 >= uint64(len(r.channels)) {
			r.fail("a value of a channel that is not listed")
			return nil
		}
		mean := r.float()
		v := minute.Single(mean)
		if place&1 != 0 {
			v.SD, v.Min, v.Max = math.NaN(), math.NaN(), math.NaN()
			has := r.byte()
			if has&hasSD != 0 {
				v.SD = r.float()
			}
			if has&hasMin != 0 {
				v.Min = r.float()
			}
			if has&hasMax != 0 {
				v.Max = r.float()
			}
			n := r.uvarint()
			if n > SamplesMax {
				r.fail("more samples than there can be")
				return nil
			}
			v.N = int32(n)
		}
		values[i] = minute.ChannelValue{Channel: r.channels[place/2], Value: v}
	}
	return values
}

func (r *frameReader) fail(what string) {
	if r.bad == "" {
		r.bad, r.b = what, nil
	}
}

// count reads a number of things that take at least so many bytes each.
func (r *frameReader) count(bytesEach int, of string) int {
	n := r.uvarint()
	if n > uint64(len(r.b)/bytesEach) {
		r.fail("more " + of + " than bytes")
		return 0
	}
	return int(n)
}

func (r *frameReader) name() string {
	n := r.count(1, "letters")
	s := r.interner.name(r.b[:n])
	r.b = r.b[n:]
	return s
}

func (r *frameReader) uvarint() uint64 {
	v, n := binary.Uvarint(r.b)
	if n <= 0 {
		r.fail("ends early")
		return 0
	}
	r.b = r.b[n:]
	return v
}

func (r *frameReader) varint() int64 {
	v, n := binary.Varint(r.b)
	if n <= 0 {
		r.fail("ends early")
		return 0
	}
	r.b = r.b[n:]
	return v
}

func (r *frameReader) byte() byte {
	if len(r.b) == 0 {
		r.fail("ends early")
		return 0
	}
	c := r.b[0]
	r.b = r.b[1:]
	return c
}

func (r *frameReader) float() float64 {
	if len(r.b) < 8 {
		r.fail("ends early")
		return 0
	}
	v := math.Float64frombits(binary.LittleEndian.Uint64(r.b))
	r.b = r.b[8:]
	return v
}
