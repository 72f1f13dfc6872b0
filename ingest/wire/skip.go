package wire

import "fmt"

// skip passes over any JSON value and is the judge of what JSON is: a reading refused for its content is passed over by
// it, so that the readings behind it can still be taken. The only failings are bad syntax and depth.
func (d *Decoder) skip(depth int) *flaw {
	switch c := d.peek(); {
	case c == '{' || c == '[':
		return d.skipNested(c, depth+1)
	case c == '"':
		return d.skipString()
	case c == '-' || c-'0' <= 9:
		_, end, syntax, _ := scanNumber(d.buf, d.pos, false)
		if !syntax {
			return &flaw{NotJSON, d.found("a number")}
		}
		d.pos = end
		return nil
	case d.word("true"), d.word("false"), d.word("null"):
		return nil
	}
	return &flaw{NotJSON, d.found("a value")}
}

func (d *Decoder) skipNested(open byte, depth int) *flaw {
	if depth > DepthMax {
		return &flaw{TooDeep, fmt.Sprintf("byte %d: nested deeper than %d", d.pos, DepthMax)}
	}
	d.pos++
	d.space()
	closing := open + 2 // in ASCII, { and } are two apart, and so are [ and ]
	if d.peek() == closing {
		d.pos++
		return nil
	}
	for {
		d.space()
		if open == '{' {
			if d.peek() != '"' {
				return &flaw{NotJSON, d.found("a key")}
			}
			if f := d.skipString(); f != nil {
				return f
			}
			d.space()
			if d.peek() != ':' {
				return &flaw{NotJSON, d.found("a colon")}
			}
			d.pos++
			d.space()
		}
		if f := d.skip(depth); f != nil {
			return f
		}
		d.space()
		switch d.peek() {
		case ',':
			d.pos++
		case closing:
			d.pos++
			return nil
		default:
			return &flaw{NotJSON, d.found("a comma or an end")}
		}
	}
}

func (d *Decoder) skipString() *flaw {
	for i := d.pos + 1; i < len(d.buf); i++ {
		switch c := d.buf[i]; {
		case c == '"':
			d.pos = i + 1
			return nil
		case c < 0x20:
			d.pos = i
			return &flaw{NotJSON, d.found("a string's end")}
		case c == '\\':
			n := escapeBytes(d.buf[i+1:])
			if n == 0 {
				d.pos = i
				return &flaw{NotJSON, d.found("an escape of JSON")}
			}
			i += n
		}
	}
	d.pos = len(d.buf)
	return &flaw{NotJSON, d.found("a string's end")}
}

// escapeBytes is the length of the escape whose backslash stands before b, 0 where it is none.
func escapeBytes(b []byte) int {
	if len(b) == 0 {
		return 0
	}
	switch b[0] {
	case '"', '\\', '/', 'b', 'f', 'n', 'r', 't':
		return 1
	case 'u':
		if len(b) < 5 {
			return 0
		}
		for _, c := range b[1:5] {
			if c-'0' > 9 && c-'a' > 5 && c-'A' > 5 {
				return 0
			}
		}
		return 5
	}
	return 0
}

func (d *Decoder) word(w string) bool {
	if len(d.buf)-d.pos < len(w) || string(d.buf[d.pos:d.pos+len(w)]) != w {
		return false
	}
	d.pos += len(w)
	return true
}

// namesMax bounds what an interner remembers. Beyond it the names are forgotten and learnt anew.
const namesMax = 16384

// An interner gives the same string for the same bytes, so that a name is allocated once and not with every reading.
type interner struct{ names map[string]string }

func (n *interner) name(b []byte) string {
	if s, ok := n.names[string(b)]; ok {
		return s
	}
	if n.names == nil || len(n.names) >= namesMax {
		n.names = make(map[string]string)
	}
	s := string(b)
	n.names[s] = s
	return s
}
