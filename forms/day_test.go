package forms

import (
	"testing"
	"time"
)

// The standard library's calendar is what days are held against: every day of an era of 400 years, and the months of it.
func TestDay_IsTheCalendars(t *testing.T) {
	first, last := time.Date(1799, time.December, 30, 0, 0, 0, 0, time.UTC), time.Date(2201, time.January, 2, 0, 0, 0, 0, time.UTC)
	for at := first; at.Before(last); at = at.AddDate(0, 0, 1) {
		d := Day(at.Unix() / 86400)
		if at.Unix() < 0 && at.Unix()%86400 != 0 {
			t.Fatalf("%v is no midnight", at)
		}
		y, m, day := at.Date()
		if got := Date(y, m, day); got != d {
			t.Fatalf("%v: day %d, want %d", at, got, d)
		}
		if gy, gm, gd := d.Civil(); gy != y || gm != m || gd != day {
			t.Fatalf("day %d: %d-%d-%d, want %v", d, gy, gm, gd, at)
		}
		if day > 28 || day == 1 {
			for _, n := range []int{-25, -12, -1, 0, 1, 3, 11, 12, 25} {
				month := time.Date(y, m+time.Month(n), 1, 0, 0, 0, 0, time.UTC)
				want := month.AddDate(0, 0, min(day, month.AddDate(0, 1, -1).Day())-1)
				if got := d.AddMonths(n); !got.Time().Equal(want) {
					t.Fatalf("%v and %d months: %v, want %v", at, n, got, want)
				}
			}
		}
	}
	for _, far := range []time.Time{time.Date(1, 1, 1, 0, 0, 0, 0, time.UTC), time.Date(-401, 3, 1, 0, 0, 0, 0, time.UTC), time.Date(9999, 12, 31, 0, 0, 0, 0, time.UTC)} {
		if d := DayOf(far); !d.Time().Equal(far) {
			t.Errorf("%v came back as %v", far, d.Time())
		}
	}
}
