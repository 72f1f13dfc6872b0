package notify

import (
	"fmt"
	"time"
)

// Quiet is the hours of the day in which nothing goes out; what is due then goes out at their end. The zero value holds never.
type Quiet struct {
	From, To int // minutes of the day in Zone; From after To spans midnight
	Zone     *time.Location
}

// Holds says whether nothing may go out now.
func (q Quiet) Holds(now time.Time) bool {
	if q.Zone == nil || q.From == q.To {
		return false
	}
	m := minuteOfDay(now.In(q.Zone))
	if q.From < q.To {
		return m >= q.From && m < q.To
	}
	return m >= q.From || m < q.To
}

func minuteOfDay(t time.Time) int { return 60*t.Hour() + t.Minute() }

// Morning is when the daily sheet goes out. The zero value is never.
type Morning struct {
	At   int // minute of the day
	Zone *time.Location
}

// sheetWithin is how late a morning sheet may still go out after its time.
const sheetWithin = 6 * 60

// Due gives the day whose sheet is due now.
func (m Morning) Due(now time.Time) (day string, ok bool) {
	if m.Zone == nil {
		return "", false
	}
	local := now.In(m.Zone)
	late := minuteOfDay(local) - m.At
	return local.Format(time.DateOnly), late >= 0 && late < sheetWithin
}

// ParseHour reads a time of day, HH:MM, as minutes.
func ParseHour(text string) (int, error) {
	t, err := time.Parse("15:04", text)
	if err != nil {
		return 0, fmt.Errorf("%q is not a time of day; write HH:MM", text)
	}
	return minuteOfDay(t), nil
}
