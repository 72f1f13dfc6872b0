package wire

import (
	"encoding/json"
	"fmt"
	"sync"

	"fluxwarden/qc/minute"
)

// DecodeJSON reads one reading or an array of them and appends them to into. It is all or nothing: any refusal is
// returned as a *Refusal and nothing is appended. A Decoder keeps the sound readings of an array.
func DecodeJSON(payload []byte, into []minute.Reading) ([]minute.Reading, error) {
	d := decoders.Get().(*Decoder)
	defer decoders.Put(d)
	n := len(into)
	out, refused := d.Decode(payload, into)
	if len(refused) > 0 {
		return out[:n], &refused[0]
	}
	return out, nil
}

var decoders = sync.Pool{New: func() any { return new(Decoder) }}

// A Decoder reads JSON payloads. It keeps the names of channels, so that a reading in the steady state costs no string.
// It is not for use by two goroutines at once.
type Decoder struct {
	// Check is asked about every sound reading and may refuse it with a reason, or complete it. It may be nil.
	Check func(*minute.Reading) (reason Reason, detail string)

	names  interner
	buf    []byte
	pos    int
	values []minute.ChannelValue // where readings get their values from; what was given away is not used again
	seen   map[string]struct{}   // names of the reading in hand, where there are many or some have no value
	mapped bool                  // seen is in use for the reading in hand
}

// Decode appends the sound readings of a payload to into, and says which others it refused and why. Bad JSON refuses the
// whole payload; a reading that is not as it should be refuses only itself. The payload is not kept.
func (d *Decoder) Decode(payload []byte, into []minute.Reading) ([]minute.Reading, []Refusal) {
	if len(payload) > PayloadBytesMax {
		return into, whole(payload, TooLarge, fmt.Sprintf("%d bytes, the limit is %d: send fewer readings at a time", len(payload), PayloadBytesMax))
	}
	d.buf, d.pos = payload, 0
	defer func() { d.buf = nil }()
	before := len(into)
	var refused []Refusal
	d.space()
	array, depth := d.peek() == '[', 0
	if array {
		depth = 1
		d.pos++
		d.space()
	}
	if !array || d.peek() != ']' {
		for index := 0; ; index++ {
			if index == ReadingsMax {
				return into[:before], whole(payload, TooManyReadings, fmt.Sprintf("more than %d readings: send fewer at a time", ReadingsMax))
			}
			start := d.pos
			reading, f, bad := d.item(depth)
			switch {
			case bad != nil:
				return into[:before], whole(payload, bad.reason, bad.detail)
			case f == nil:
				into = append(into, reading)
			default:
				refused = append(refused, Refusal{f.reason, f.detail, index, start, d.pos})
			}
			d.space()
			if !array || d.peek() != ',' {
				break
			}
			d.pos++
			d.space()
		}
	}
	if array {
		if d.peek() != ']' {
			return into[:before], whole(payload, NotJSON, d.found("a comma or the array's end"))
		}
		d.pos++
		d.space()
	}
	if d.pos != len(d.buf) {
		return into[:before], whole(payload, NotJSON, d.found("the payload's end"))
	}
	return into, refused
}

func whole(payload []byte, reason Reason, detail string) []Refusal {
	return []Refusal{{reason, detail, Whole, 0, len(payload)}}
}

// A flaw is a refusal before it is known where the reading begins and ends.
type flaw struct {
	reason Reason
	detail string
}

// item reads one reading and passes over it where it is refused. What is bad is bad for the whole payload.
func (d *Decoder) item(depth int) (r minute.Reading, f, bad *flaw) {
	start := d.pos
	if r, f = d.reading(); f != nil {
		d.pos = start
		return r, f, d.skip(depth)
	}
	if d.Check != nil {
		if reason, detail := d.Check(&r); reason != "" {
			return r, &flaw{reason, detail}, nil
		}
	}
	return r, nil, nil
}

func (d *Decoder) reading() (r minute.Reading, f *flaw) {
	if d.peek() != '{' {
		return r, &flaw{BadValue, d.found("an object with t and x")}
	}
	d.pos++
	var haveT, haveX bool
	for first := true; ; first = false {
		key, end, f := d.key(first)
		if f != nil {
			return r, f
		}
		if end {
			break
		}
		switch string(key) {
		case "t":
			if haveT {
				return r, &flaw{DuplicateKey, "t is given twice"}
			}
			haveT = true
			if r.At, f = d.time(); f != nil {
				return r, f
			}
		case "x":
			if haveX {
				return r, &flaw{DuplicateKey, "x is given twice"}
			}
			haveX = true
			if r.Values, f = d.channels(); f != nil {
				return r, f
			}
		default:
			return r, &flaw{UnknownKey, fmt.Sprintf("key %s: a reading has t and x only; measured values belong into x", quote(key))}
		}
	}
	if !haveT {
		return r, &flaw{MissingKey, "t, the time of the reading, is missing"}
	}
	if !haveX {
		return r, &flaw{MissingKey, "x, the values of the reading, is missing"}
	}
	return r, nil
}

func (d *Decoder) time() (minute.Stamp, *flaw) {
	if d.peek() != '"' {
		return 0, &flaw{BadTime, d.found("t as a string")}
	}
	text, f := d.text()
	if f != nil {
		return 0, f
	}
	at, ok := ParseTime(text)
	if !ok {
		return 0, &flaw{BadTime, fmt.Sprintf("t is %s: give RFC 3339 with a zone, such as 2026-06-21T12:00:01Z, between %d and %d", quote(text), YearMin, YearMax)}
	}
	return at, nil
}

// manyChannels is where looking for a duplicate by comparing all names becomes dearer than a map.
const manyChannels = 24

func (d *Decoder) channels() ([]minute.ChannelValue, *flaw) {
	if d.peek() != '{' {
		return nil, &flaw{BadValue, d.found("x as an object of channels")}
	}
	d.pos++
	from := len(d.values)
	d.mapped = false
	count := 0
	for first := true; ; first = false {
		key, end, f := d.key(first)
		if f != nil {
			return nil, f
		}
		if end {
			break
		}
		if !validChannel(key) {
			return nil, &flaw{BadChannel, fmt.Sprintf("channel %s: a name is 1 to %d of a-z 0-9 _ . -", quote(key), ChannelNameBytesMax)}
		}
		if count++; count > ChannelsMax {
			return nil, &flaw{TooManyChannels, fmt.Sprintf("more than %d channels", ChannelsMax)}
		}
		name := d.names.name(key)
		if d.repeated(name, d.values[from:]) {
			return nil, &flaw{DuplicateKey, fmt.Sprintf("channel %s is given twice", name)}
		}
		v, present, f := d.value(name)
		if f != nil {
			return nil, f
		}
		if !present { // it leaves no value behind that would tell of its name
			d.remember(d.values[from:])
			d.seen[name] = struct{}{}
			continue
		}
		d.push(&from, minute.ChannelValue{Channel: name, Value: v})
	}
	return d.values[from:len(d.values):len(d.values)], nil
}

const chunkMin = 128 // values in a chunk

// push adds a value to the reading in hand, which begins at *from. Where the chunk is full, the reading moves to a new
// one, so that its values stay side by side and the earlier readings keep theirs.
func (d *Decoder) push(from *int, v minute.ChannelValue) {
	if len(d.values) == cap(d.values) {
		// About as many as the rest of the payload can hold, at some twelve bytes a value, or as many small payloads want.
		begun := d.values[*from:]
		d.values = append(make([]minute.ChannelValue, 0, max(chunkMin, len(begun)+8+(len(d.buf)-d.pos)/12)), begun...)
		*from = 0
	}
	d.values = append(d.values, v)
}

// repeated says whether the name was there before in this reading.
func (d *Decoder) repeated(name string, values []minute.ChannelValue) bool {
	if !d.mapped && len(values) <= manyChannels {
		for i := range values {
			if values[i].Channel == name {
				return true
			}
		}
		return false
	}
	d.remember(values)
	if _, ok := d.seen[name]; ok {
		return true
	}
	d.seen[name] = struct{}{}
	return false
}

// remember goes over to a map of names, once in a reading.
func (d *Decoder) remember(values []minute.ChannelValue) {
	if d.mapped {
		return
	}
	d.mapped = true
	if d.seen == nil {
		d.seen = make(map[string]struct{})
	}
	clear(d.seen)
	for i := range values {
		d.seen[values[i].Channel] = struct{}{}
	}
}

// key reads the next key of an object and the colon behind it; end is true at the closing brace.
func (d *Decoder) key(first bool) (key []byte, end bool, f *flaw) {
	d.space()
	switch c := d.peek(); {
	case c == '}':
		d.pos++
		return nil, true, nil
	case !first && c == ',':
		d.pos++
		d.space()
	case !first:
		return nil, false, &flaw{NotJSON, d.found("a comma or the object's end")}
	}
	if d.peek() != '"' {
		return nil, false, &flaw{NotJSON, d.found("a key")}
	}
	key, f = d.text()
	if f != nil {
		return nil, false, f
	}
	d.space()
	if d.peek() != ':' {
		return nil, false, &flaw{NotJSON, d.found("a colon")}
	}
	d.pos++
	d.space()
	return key, false, nil
}

// text reads a string. Escapes are rare, so they are left to encoding/json.
func (d *Decoder) text() ([]byte, *flaw) {
	start := d.pos + 1
	for i := start; i < len(d.buf); i++ {
		switch c := d.buf[i]; {
		case c == '"':
			d.pos = i + 1
			return d.buf[start:i], nil
		case c == '\\':
			return d.escaped(start - 1)
		case c < 0x20:
			d.pos = i
			return nil, &flaw{NotJSON, d.found("a string's end")}
		}
	}
	d.pos = len(d.buf)
	return nil, &flaw{NotJSON, d.found("a string's end")}
}

func (d *Decoder) escaped(start int) ([]byte, *flaw) {
	d.pos = start
	if f := d.skipString(); f != nil {
		return nil, f
	}
	var s string
	if err := json.Unmarshal(d.buf[start:d.pos], &s); err != nil {
		return nil, &flaw{NotJSON, err.Error()}
	}
	return []byte(s), nil
}

func (d *Decoder) null() *flaw {
	if !d.word("null") {
		return &flaw{NotJSON, d.found("null")}
	}
	return nil
}

// found says what stands where something else was wanted.
func (d *Decoder) found(wanted string) string {
	if d.pos >= len(d.buf) {
		return fmt.Sprintf("byte %d: found the end, wanted %s", d.pos, wanted)
	}
	return fmt.Sprintf("byte %d: found %s, wanted %s", d.pos, quote(d.buf[d.pos:min(len(d.buf), d.pos+12)]), wanted)
}

func (d *Decoder) peek() byte {
	if d.pos < len(d.buf) {
		return d.buf[d.pos]
	}
	return 0
}

func (d *Decoder) space() {
	for d.pos < len(d.buf) {
		switch d.buf[d.pos] {
		case ' ', '\t', '\n', '\r':
			d.pos++
		default:
			return
		}
	}
}
