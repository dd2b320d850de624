package intake

import (
	"regexp"
	"strconv"
	"strings"
	"time"

	"tripwell/forms"
)

// Order says which comes first in a date of figures alone.
type Order string

// The orders of day and month. UnknownOrder means that 03/04/2026 must be asked about.
const (
	UnknownOrder Order = ""
	DMY          Order = "dmy"
	MDY          Order = "mdy"
)

var (
	errNoDate    = wrong("This is no date. Write it as 2026-12-31.")
	errNoDay     = wrong("There is no such day. Check day, month and year.")
	errHalfDate  = wrong("This is not a whole date. Write it with day, month and year, as 2026-12-31.")
	errAmbiguous = wrong("This may be two different days: say whether the day or the month comes first, or write it as 2026-12-31.")
)

var (
	yearFirst  = regexp.MustCompile(`^(\d{4})[-/. ]\s?(\d{1,2})[-/. ]\s?(\d{1,2})\.?$`)
	figureDate = regexp.MustCompile(`^(\d{1,2})([-/. ])\s?(\d{1,2})[-/. ]\s?(\d{4}|'?\d{2})\.?$`)
	dayWord    = regexp.MustCompile(`^(\d{1,2})(?:st|nd|rd|th|er|\.|º)?[-/. ,]*(?:de |of )?(\pL{3,12})\.?[-/. ,]*(?:de |del )?(\d{4}|'?\d{2})$`)
	wordDay    = regexp.MustCompile(`^(\pL{3,12})\.?[-/. ]*(\d{1,2})(?:st|nd|rd|th)?[-/. ,]+(\d{4}|'?\d{2})$`)
	clockTail  = regexp.MustCompile(`(?i)[T, ]+\d{1,2}[:.]\d{2}(?:[:.]\d{2}(?:\.\d+)?)?\s?(?:am|pm|h|z)?$`)
	weekday    = regexp.MustCompile(`(?i)^(?:mon|tue|tues|wed|thu|thur|thurs|fri|sat|sun|lun|mié|jue|vie|sáb|dom)(?:day|sday|nesday|rsday|urday)?\.?,?\s+(\d|\pL)`)
	halfDate   = regexp.MustCompile(`^(?:(?:19|20)\d{2}|(\d{1,2})[-/.](?:19|20)\d{2}|(?:19|20)\d{2}[-/.](\d{1,2})|\pL{3,12}\.?[-/. ]*'?(?:\d{4}|\d{2}))$`)
)

// ParseDate reads a day as people type it: 2026-12-31, 31.12.2026, 12/31/26, 31 Dec 2026, December 31st, 2026; a time of
// day behind it is left out. Two-digit years are 1969 to 2068, as POSIX strptime reads %y. ambiguous tells that day and
// month could be either way round and order does not say which; the day is then NoDay and the error asks.
func ParseDate(text string, order Order) (day forms.Day, ambiguous bool, err error) {
	s := strings.Join(strings.Fields(text), " ")
	if len(s) > 60 {
		return forms.NoDay, false, errNoDate
	}
	s = strings.TrimSpace(clockTail.ReplaceAllString(s, ""))
	if m := weekday.FindStringSubmatchIndex(s); m != nil {
		s = s[m[2]:]
	}
	if m := yearFirst.FindStringSubmatch(s); m != nil {
		return named(m[1], m[2], m[3])
	}
	if len(s) == 8 && allDigits(s) && (s[:2] == "19" || s[:2] == "20") {
		return named(s[:4], s[4:6], s[6:])
	}
	if m := figureDate.FindStringSubmatch(s); m != nil {
		return figures(m[1], m[3], m[4], order)
	}
	if m := dayWord.FindStringSubmatch(s); m != nil {
		if month, ok := monthNamed(m[2]); ok {
			return named(fullYear(m[3]), strconv.Itoa(int(month)), m[1])
		}
	}
	if m := wordDay.FindStringSubmatch(s); m != nil {
		if month, ok := monthNamed(m[1]); ok {
			return named(fullYear(m[3]), strconv.Itoa(int(month)), m[2])
		}
	}
	if halfDate.MatchString(s) {
		return forms.NoDay, false, errHalfDate
	}
	return forms.NoDay, false, errNoDate
}

// figures reads a date whose first two figures are day and month in some order.
func figures(a, b, year string, order Order) (forms.Day, bool, error) {
	x, _ := strconv.Atoi(a)
	y, _ := strconv.Atoi(b)
	year = fullYear(year)
	switch {
	case x > 12 && y > 12, x == 0, y == 0:
		return forms.NoDay, false, errNoDay
	case x > 12 || x == y:
		return named(year, b, a)
	case y > 12:
		return named(year, a, b)
	case order == DMY:
		return named(year, b, a)
	case order == MDY:
		return named(year, a, b)
	}
	return forms.NoDay, true, errAmbiguous
}

// named checks that a day exists: time.Date would turn 31 April into 1 May.
func named(year, month, day string) (forms.Day, bool, error) {
	y, _ := strconv.Atoi(year)
	m, _ := strconv.Atoi(month)
	d, _ := strconv.Atoi(day)
	if y < 1900 || y > 2199 || m < 1 || m > 12 || d < 1 {
		return forms.NoDay, false, errNoDay
	}
	t := time.Date(y, time.Month(m), d, 0, 0, 0, 0, time.UTC)
	if t.Day() != d {
		return forms.NoDay, false, errNoDay
	}
	return forms.DayOf(t), false, nil
}

func fullYear(s string) string {
	s = strings.TrimPrefix(s, "'")
	if len(s) != 2 {
		return s
	}
	if s >= "69" {
		return "19" + s
	}
	return "20" + s
}

func allDigits(s string) bool { return s != "" && strings.Trim(s, "0123456789") == "" }

// months by the beginnings of their names in English, Spanish, German and French.
var months = []struct {
	month  time.Month
	begins []string
}{
	{time.January, []string{"jan", "ene", "jän"}}, {time.February, []string{"feb", "fév", "fev"}},
	{time.March, []string{"mar", "mär", "mrz", "maer"}}, {time.April, []string{"apr", "abr", "avr"}},
	{time.May, []string{"may", "mai"}}, {time.June, []string{"jun", "juin"}},
	{time.July, []string{"jul", "juil"}}, {time.August, []string{"aug", "ago", "aoû", "aou"}},
	{time.September, []string{"sep", "set"}}, {time.October, []string{"oct", "okt"}},
	{time.November, []string{"nov"}}, {time.December, []string{"dec", "dic", "dez", "déc"}},
}

// monthNames are all letters a month's name may consist of; "mark" begins like March and is none.
var monthName = regexp.MustCompile(`^(?:jan(?:uary|uar|vier)?|jän(?:ner)?|ene(?:ro)?|feb(?:ruary|ruar|rero)?|f[ée]v(?:r|rier)?|mar(?:ch|zo|s)?|m(?:är|rz|ärz|aerz)|apr(?:il)?|abr(?:il)?|avr(?:il)?|may(?:o)?|mai|june?|juni[o]?|juin|jul(?:y|i|io)?|juil(?:let)?|aug(?:ust)?|ago(?:sto)?|ao[ûu]t?|sept?(?:ember|iembre|embre)?|set(?:iembre)?|o[ck]t(?:ober|ubre|obre)?|nov(?:ember|iembre|embre)?|de[cz](?:ember|embre)?|dic(?:iembre)?|déc(?:embre)?)$`)

func monthNamed(s string) (time.Month, bool) {
	s = strings.ToLower(s)
	if !monthName.MatchString(s) {
		return 0, false
	}
	for _, m := range months {
		for _, b := range m.begins {
			if strings.HasPrefix(s, b) {
				return m.month, true
			}
		}
	}
	return 0, false
}

var (
	monthYear = regexp.MustCompile(`^(\pL{3,12})\.?[-/. ,]*('?\d{2}|\d{4})?$`)
	yearMonth = regexp.MustCompile(`^((?:19|20)\d{2})[-/. ](\d{1,2})$`)
	figMonth  = regexp.MustCompile(`^(\d{1,2})[-/. ]((?:19|20)\d{2})$`)
)

// ParseMonth reads a month as the head of a column may name it: Jan, January 2026, Jan-26, 2026-01, 01/2026. Year is 0
// where none is stated.
func ParseMonth(text string) (year int, month time.Month, ok bool) {
	s := strings.Join(strings.Fields(text), " ")
	if m := monthYear.FindStringSubmatch(s); m != nil {
		if month, ok = monthNamed(m[1]); ok && m[2] != "" {
			year, _ = strconv.Atoi(fullYear(m[2]))
		}
		return year, month, ok
	}
	y, mo := "", ""
	if m := yearMonth.FindStringSubmatch(s); m != nil {
		y, mo = m[1], m[2]
	} else if m := figMonth.FindStringSubmatch(s); m != nil {
		y, mo = m[2], m[1]
	}
	n, _ := strconv.Atoi(mo)
	if n < 1 || n > 12 {
		return 0, 0, false
	}
	year, _ = strconv.Atoi(y)
	return year, time.Month(n), true
}
