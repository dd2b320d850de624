package forms

import (
	"fmt"
	"time"
)

// Day is a civil date without a time zone: days since 1970-01-01. It sorts as it counts.
type Day int32

// NoDay marks a date that is not there (JSON null, empty cell).
const NoDay Day = -1 << 31

// DayOf gives the civil day of t in the zone t carries.
func DayOf(t time.Time) Day {
	return Date(t.Date())
}

// The Gregorian calendar repeats every 400 years. Days are counted in years that begin with March, so that the day leap
// years add is the last of its year; the months from March on are then 153 days every five.
const (
	eraDays  = 146_097
	eraShift = 719_468 // from 1 March of year 0 to 1970-01-01
)

// Date gives the day of year y, month m, day d, which must exist.
func Date(y int, m time.Month, d int) Day {
	mp := (int(m) + 9) % 12
	if m <= time.February {
		y--
	}
	yoe := floorMod(y, 400)
	return Day((y-yoe)/400*eraDays + yoe*365 + yoe/4 - yoe/100 + (153*mp+2)/5 + d - 1 - eraShift)
}

// Civil gives the year, month and day of the month.
func (d Day) Civil() (y int, m time.Month, day int) {
	z := int(d) + eraShift
	doe := floorMod(z, eraDays)
	yoe := (doe - doe/1_460 + doe/36_524 - doe/146_096) / 365
	doy := doe - (365*yoe + yoe/4 - yoe/100)
	mp := (5*doy + 2) / 153
	y, m, day = (z-doe)/eraDays*400+yoe, time.Month(mp+3), doy-(153*mp+2)/5+1
	if mp >= 10 {
		y, m = y+1, m-12
	}
	return y, m, day
}

// ParseDay reads YYYY-MM-DD (ISO 8601 extended calendar date).
func ParseDay(s string) (Day, error) {
	t, err := time.Parse(time.DateOnly, s)
	if err != nil {
		return NoDay, fmt.Errorf("%q is not a date: write it as 2026-12-31", s)
	}
	return DayOf(t), nil
}

// Time gives midnight UTC of the day.
func (d Day) Time() time.Time { return time.Unix(int64(d)*86400, 0).UTC() }

// String gives YYYY-MM-DD, or "" for NoDay.
func (d Day) String() string {
	if d == NoDay {
		return ""
	}
	return d.Time().Format(time.DateOnly)
}

// MarshalText gives YYYY-MM-DD.
func (d Day) MarshalText() ([]byte, error) { return []byte(d.String()), nil }

// UnmarshalText reads YYYY-MM-DD; empty is NoDay.
func (d *Day) UnmarshalText(b []byte) (err error) {
	if len(b) == 0 {
		*d = NoDay
		return nil
	}
	*d, err = ParseDay(string(b))
	return err
}
