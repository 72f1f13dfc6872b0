package rules

import (
	"errors"
	"fmt"
	"strings"
	"time"
)

// A TimePattern reads the times of a file: rfc3339, unix (seconds since 1970), or a pattern of YYYY YY MM DD DDD hh mm ss and what stands
// between them. Seconds may have a fraction. 24:00 is the end of a day, as some loggers write midnight.
type TimePattern struct {
	text  string
	parts []timePart
}

type timePart struct {
	what byte // Y y M D J (day of the year) h m s, or 0 for a letter that must stand there
	size int
	char byte
}

// A form of time that needs no parts.
const (
	stampRFC3339 = "rfc3339"
	stampUnix    = "unix"
)

var timeWords = []struct {
	word string
	what byte
}{{"YYYY", 'Y'}, {"YY", 'y'}, {"DDD", 'J'}, {"DD", 'D'}, {"MM", 'M'}, {"hh", 'h'}, {"mm", 'm'}, {"ss", 's'}}

// NewTimePattern reads a pattern; the error says what is missing in it.
func NewTimePattern(text string) (*TimePattern, error) {
	p := &TimePattern{text: text}
	if text == stampRFC3339 || text == stampUnix {
		return p, nil
	}
	have := map[byte]bool{}
	for rest := text; rest != ""; {
		found := false
		for _, w := range timeWords {
			if strings.HasPrefix(rest, w.word) {
				if have[w.what] {
					return nil, fmt.Errorf("%s is there twice", w.word)
				}
				have[w.what], found = true, true
				p.parts = append(p.parts, timePart{what: w.what, size: len(w.word)})
				rest = rest[len(w.word):]
				break
			}
		}
		if !found {
			c := rest[0]
			if (c >= 'a' && c <= 'z' && c != 'T') || (c >= 'A' && c <= 'Z' && c != 'T') || c >= 0x80 {
				return nil, fmt.Errorf("%q is no part of a time", rest[:1])
			}
			p.parts = append(p.parts, timePart{char: c})
			rest = rest[1:]
		}
	}
	switch {
	case have['Y'] == have['y']:
		return nil, errors.New("it needs YYYY or YY")
	case have['J'] == (have['M'] || have['D']) || have['M'] != have['D']:
		return nil, errors.New("it needs MM and DD, or DDD")
	case !have['h'] || !have['m']:
		return nil, errors.New("it needs hh and mm")
	}
	return p, nil
}

func (p *TimePattern) String() string { return p.text }

// Zoned says whether the times carry their zone.
func (p *TimePattern) Zoned() bool { return p.text == stampRFC3339 || p.text == stampUnix }

var errNotATime = errors.New("not a time of that form")

// Parse reads a time; zone is where it carries none. Microseconds are kept, what is finer is cut off.
func (p *TimePattern) Parse(text string, zone *time.Location) (time.Time, error) {
	switch p.text {
	case stampRFC3339:
		at, err := time.Parse(time.RFC3339Nano, text)
		if err != nil {
			return at, errNotATime
		}
		return at.Truncate(time.Microsecond).UTC(), nil
	case stampUnix:
		whole, micros, rest, ok := seconds(text, 12)
		if !ok || rest != "" {
			return time.Time{}, errNotATime
		}
		return time.Unix(int64(whole), int64(micros)*1000).UTC(), nil
	}
	v := map[byte]int{'M': 1, 'D': 1}
	micros := 0
	for i, part := range p.parts {
		if part.what == 0 {
			if text == "" || text[0] != part.char {
				return time.Time{}, errNotATime
			}
			text = text[1:]
			continue
		}
		// Where the next part is a sign, one digit less may stand: 1/6/2026, 9:05. Parts that touch have their full width.
		least := 1
		if (part.what == 'Y' || part.what == 'y') || (i+1 < len(p.parts) && p.parts[i+1].what != 0) {
			least = part.size
		}
		n, digits := 0, 0
		for digits < part.size && digits < len(text) && text[digits] >= '0' && text[digits] <= '9' {
			n, digits = n*10+int(text[digits]-'0'), digits+1
		}
		if digits < least {
			return time.Time{}, errNotATime
		}
		text = text[digits:]
		v[part.what] = n
		if part.what == 's' {
			text, micros = fraction(text)
		}
	}
	if text != "" {
		return time.Time{}, errNotATime
	}
	return p.build(v, micros, zone)
}

func (p *TimePattern) build(v map[byte]int, micros int, zone *time.Location) (time.Time, error) {
	year := v['Y']
	if yy, short := v['y']; short {
		year = 2000 + yy
		if yy >= 70 {
			year = 1900 + yy
		}
	}
	midnight := v['h'] == 24 && v['m'] == 0 && v['s'] == 0 && micros == 0
	if (v['h'] > 23 && !midnight) || v['m'] > 59 || v['s'] > 60 || v['M'] < 1 || v['M'] > 12 || v['D'] < 1 {
		return time.Time{}, errNotATime
	}
	if zone == nil {
		zone = time.UTC
	}
	day := time.Date(year, time.Month(v['M']), v['D'], 0, 0, 0, 0, zone)
	if j, counted := v['J']; counted {
		day = time.Date(year, 1, j, 0, 0, 0, 0, zone)
		if j < 1 || day.Year() != year {
			return time.Time{}, errNotATime
		}
	} else if day.Day() != v['D'] {
		return time.Time{}, errNotATime // the 31st of a month that has 30
	}
	// A leap second is the last of its minute twice, as in clocks that know none.
	return day.Add(time.Duration(v['h'])*time.Hour + time.Duration(v['m'])*time.Minute + time.Duration(min(v['s'], 59))*time.Second +
		time.Duration(micros)*time.Microsecond).UTC(), nil
}

// seconds reads whole seconds of at most size digits with a fraction.
func seconds(text string, size int) (whole, micros int, rest string, ok bool) {
	n := 0
	for n < size && n < len(text) && text[n] >= '0' && text[n] <= '9' {
		whole, n = whole*10+int(text[n]-'0'), n+1
	}
	rest, micros = fraction(text[n:])
	return whole, micros, rest, n > 0
}

func fraction(text string) (rest string, micros int) {
	if len(text) < 2 || text[0] != '.' || text[1] < '0' || text[1] > '9' {
		return text, 0
	}
	unit := 100_000
	i := 1
	for ; i < len(text) && text[i] >= '0' && text[i] <= '9'; i++ {
		micros += int(text[i]-'0') * unit
		unit /= 10
	}
	return text[i:], micros
}
