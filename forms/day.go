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
	y, m, d := t.Date()
	return Day(time.Date(y, m, d, 0, 0, 0, 0, time.UTC).Unix() / 86400)
}

// Date gives the day of year y, month m, day d, which must exist.
func Date(y int, m time.Month, d int) Day { return DayOf(time.Date(y, m, d, 0, 0, 0, 0, time.UTC)) }

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
