package sun

import "math"

const (
	// J2000JulianDay is the Julian day of 2000-01-01 12:00.
	J2000JulianDay = 2451545.0

	j2000UnixMicros = 946_728_000_000_000 // 2000-01-01T12:00:00Z
	microsPerDay    = 86_400_000_000
	secondsPerDay   = 86_400.0
)

// JulianDay returns the Julian day of a calendar date; dayOfMonth carries the fraction of
// the day. Dates before 1582-10-15 are read in the Julian calendar, years are
// astronomical (the year before 1 is 0). Valid from -4712-01-01 12h on.
//
// Source: Meeus 1998, chapter 7; Reda and Andreas, eq. 4.
func JulianDay(year, month int, dayOfMonth float64) float64 {
	gregorian := year > 1582 || (year == 1582 && (month > 10 || (month == 10 && dayOfMonth >= 15)))
	if month <= 2 {
		year--
		month += 12
	}
	jd := math.Floor(float64(365.25*float64(year+4716))) + math.Floor(float64(30.6001*float64(month+1))) + dayOfMonth - 1524.5
	if gregorian {
		century := math.Floor(float64(year) / 100)
		jd += 2 - century + math.Floor(century/4)
	}
	return jd
}

// daysFromJ2000 returns the days from J2000 to a Unix time; exact to a microsecond for
// two centuries, where a Julian day in one float64 resolves 40 microseconds.
func daysFromJ2000(unixMicros int64) float64 {
	return float64(unixMicros-j2000UnixMicros) / microsPerDay
}

// DecimalYear returns the calendar year with the fraction of the year passed at noon of a
// day (days since 1970-01-01), for DeltaTSeconds. The mean Gregorian year is used:
// within 0.003 years of the calendar's.
func DecimalYear(day int64) float64 { return 1970 + (float64(day)+0.5)/365.2425 }
