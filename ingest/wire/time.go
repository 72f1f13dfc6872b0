package wire

import "fluxwarden/qc/minute"

// minuteBeforeMidnight is the only minute of a UTC day that may have a second 60.
const minuteBeforeMidnight = 1439

// ParseTime reads an RFC 3339 time with a zone. The T may also be a t or a space, the Z a z. Digits beyond microseconds
// are cut off. A leap second (23:59:60 UTC) becomes the last microsecond of its minute: a Stamp has no room for it, and
// there it stays in the minute it belongs to without meeting a sample of the next. It is false for anything else, and
// for years outside YearMin..YearMax.
func ParseTime(b []byte) (minute.Stamp, bool) {
	if len(b) < len("2006-01-02T15:04:05Z") || b[4] != '-' || b[7] != '-' || b[13] != ':' || b[16] != ':' {
		return 0, false
	}
	if c := b[10]; c != 'T' && c != 't' && c != ' ' {
		return 0, false
	}
	century, month, day := two(b[0:]), two(b[5:]), two(b[8:])
	year, hour, min, sec := century*100+two(b[2:]), two(b[11:]), two(b[14:]), two(b[17:])
	if century < 0 || year < YearMin || year > YearMax || month < 1 || month > 12 || day < 1 || day > daysIn(year, month) {
		return 0, false
	}
	if uint(hour) > 23 || uint(min) > 59 || uint(sec) > 60 || two(b[2:]) < 0 {
		return 0, false
	}
	micros, rest, ok := fraction(b[19:])
	if !ok {
		return 0, false
	}
	offsetMinutes, ok := zone(rest)
	if !ok {
		return 0, false
	}
	minutes := daysFrom1970(year, month, day)*minute.PerDay + int64(hour*60+min-offsetMinutes)
	if sec == 60 {
		if minutes-minute.FloorDiv(minutes, minute.PerDay)*minute.PerDay != minuteBeforeMidnight {
			return 0, false
		}
		sec, micros = 59, minute.MicrosPerSecond-1
	}
	return minute.Stamp(minutes*minute.MicrosPerMinute + int64(sec)*minute.MicrosPerSecond + int64(micros)), true
}

// two reads two digits; it is very negative where they are not digits.
func two(b []byte) int {
	hi, lo := b[0]-'0', b[1]-'0'
	if hi > 9 || lo > 9 {
		return -1 << 20
	}
	return int(hi)*10 + int(lo)
}

// fraction reads an optional fraction of a second and gives what is left.
func fraction(b []byte) (micros int, rest []byte, ok bool) {
	if b[0] != '.' {
		return 0, b, true
	}
	i, scale := 1, 100_000
	for ; i < len(b) && b[i]-'0' <= 9; i++ {
		micros += int(b[i]-'0') * scale
		scale /= 10
	}
	return micros, b[i:], i > 1
}

// zone reads Z or an offset, in minutes east.
func zone(b []byte) (minutes int, ok bool) {
	if len(b) == 1 && (b[0] == 'Z' || b[0] == 'z') {
		return 0, true
	}
	if len(b) != 6 || b[3] != ':' || (b[0] != '+' && b[0] != '-') {
		return 0, false
	}
	h, m := two(b[1:]), two(b[4:])
	if uint(h) > 23 || uint(m) > 59 {
		return 0, false
	}
	if b[0] == '-' {
		return -(h*60 + m), true
	}
	return h*60 + m, true
}

func daysIn(year, month int) int {
	switch month {
	case 4, 6, 9, 11:
		return 30
	case 2:
		if year%4 == 0 && (year%100 != 0 || year%400 == 0) {
			return 29
		}
		return 28
	}
	return 31
}

// daysFrom1970 counts days in the proleptic Gregorian calendar, for years after 0. The year is taken to begin in March,
// so that the leap day is its last (common practice).
func daysFrom1970(year, month, day int) int64 {
	if month <= 2 {
		year, month = year-1, month+12
	}
	return int64(365*year + year/4 - year/100 + year/400 + (153*(month-3)+2)/5 + day - 1 - 719468)
}

// AppendTime writes a stamp as RFC 3339 in UTC, with as many digits of the second as it needs.
func AppendTime(dst []byte, at minute.Stamp) []byte {
	year, month, day := civil(at.Day())
	inDay := int64(at) - at.Day()*minute.MicrosPerDay
	secs, micros := int(inDay/minute.MicrosPerSecond), int(inDay%minute.MicrosPerSecond)
	dst = appendDigits(dst, year, 4)
	dst = appendDigits(append(dst, '-'), month, 2)
	dst = appendDigits(append(dst, '-'), day, 2)
	dst = appendDigits(append(dst, 'T'), secs/3600, 2)
	dst = appendDigits(append(dst, ':'), secs/60%60, 2)
	dst = appendDigits(append(dst, ':'), secs%60, 2)
	if micros > 0 {
		width := 6
		for micros%10 == 0 {
			micros, width = micros/10, width-1
		}
		dst = appendDigits(append(dst, '.'), micros, width)
	}
	return append(dst, 'Z')
}

// civil is the date of a day counted from 1970, the inverse of daysFrom1970.
func civil(days int64) (year, month, day int) {
	z := days + 719468
	era := minute.FloorDiv(z, 146097)
	doe := int(z - era*146097)
	yoe := (doe - doe/1460 + doe/36524 - doe/146096) / 365
	doy := doe - (365*yoe + yoe/4 - yoe/100)
	mp := (5*doy + 2) / 153
	year, month, day = yoe+int(era)*400, mp+3, doy-(153*mp+2)/5+1
	if month > 12 {
		year, month = year+1, month-12
	}
	return year, month, day
}

func appendDigits(dst []byte, v, width int) []byte {
	var b [8]byte
	for i := width - 1; i >= 0; i-- {
		b[i], v = byte('0'+v%10), v/10
	}
	return append(dst, b[:width]...)
}
