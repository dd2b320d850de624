package record

import (
	"fmt"
	"strconv"
	"time"
)

// MaxClock is the largest stamp of the hybrid clock; the rest of the 64 bits is room to count on from it.
const MaxClock = 1<<63 - 1

// NextClock gives the stamp of a new record: the larger of the corrected time in ms << 16 and last + 1, where last is
// the largest stamp seen or made. A stamp orders; it is never shown as a time.
func NextClock(last uint64, corrected time.Time) uint64 {
	var now uint64
	if ms := corrected.UnixMilli(); ms > 0 {
		now = uint64(ms) << 16
	}
	return min(max(now, last+1), MaxClock)
}

// ClockText writes a stamp as 16 lower-case hexadecimal digits.
func ClockText(c uint64) string { return fmt.Sprintf("%016x", c) }

// ParseClock reads a stamp; zero and what is beyond MaxClock are none.
func ParseClock(s string) (uint64, bool) {
	if len(s) != 16 {
		return 0, false
	}
	for i := 0; i < 16; i++ {
		if !isHex(s[i]) {
			return 0, false
		}
	}
	c, err := strconv.ParseUint(s, 16, 64)
	return c, err == nil && c > 0 && c <= MaxClock
}

// ParseTime reads a time as records write it (RFC 3339): 2026-12-01T09:30:00.123+01:00, T and Z in upper case, up to
// nine digits after a point, an offset always.
func ParseTime(s string) (time.Time, bool) {
	if len(s) < 20 || s[10] != 'T' {
		return time.Time{}, false
	}
	rest := s[19:]
	if rest[0] == '.' {
		i := 1
		for i < len(rest) && rest[i] >= '0' && rest[i] <= '9' {
			i++
		}
		if i == 1 || i > 10 {
			return time.Time{}, false
		}
		rest = rest[i:]
	}
	if rest != "Z" && (len(rest) != 6 || rest[0] != '+' && rest[0] != '-' || rest[3] != ':' || rest[1:3] > "23" || rest[4:6] > "59") {
		return time.Time{}, false
	}
	t, err := time.Parse(time.RFC3339Nano, s)
	return t, err == nil
}

// TimeText writes a time as records and stamps do: milliseconds, the offset the time carries.
func TimeText(t time.Time) string { return t.Format("2006-01-02T15:04:05.000Z07:00") }
