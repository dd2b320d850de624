package server

import (
	"math"
	"strconv"
	"strings"
	"time"

	"tripwell/forms"
	"tripwell/static"
)

// Spaces and hyphens that never break, so that a value stays with its unit and a tag in one piece.
const (
	thin   = "\u202f"
	hyphen = "\u2011"
	dash   = "–"
)

// ink writes values the way pages show them; every word comes from the catalogue.
type ink struct {
	words *static.Words
	own   map[string]string // what forms call checks an organisation added, by code
}

// calling names checks an organisation added as their form does.
func (k ink) calling(own map[string]string) ink {
	k.own = own
	return k
}

func (k ink) say(key string, pairs ...any) string { return k.words.Say(key, pairs...) }

// named is the catalogue's word for a code of a closed list; a code without a word is shown as it was given, for records
// of newer programs.
func (k ink) named(section, code string) string {
	if key := section + "." + code; code != "" && k.words.Has(key) {
		return k.words.Say(key)
	}
	return code
}

// list picks the n-th word of a line of words (weekdays, months).
func (k ink) list(key string, n int) string {
	if words := strings.Fields(k.say(key)); n < len(words) {
		return words[n]
	}
	return strconv.Itoa(n + 1)
}

// day writes 3 Nov 2026, a dash for no day.
func (k ink) day(d forms.Day) string {
	if d == forms.NoDay {
		return dash
	}
	t := d.Time()
	return strconv.Itoa(t.Day()) + "\u00a0" + k.list("office.day.mon", int(t.Month())-1) + "\u00a0" + strconv.Itoa(t.Year())
}

// near writes a day within half a year of today with its weekday and without its year: Mon 30 Nov.
func (k ink) near(d, today forms.Day) string {
	if d == forms.NoDay || d < today-182 || d > today+182 {
		return k.day(d)
	}
	t := d.Time()
	return k.list("office.day.wd", int(t.Weekday())) + "\u00a0" + strconv.Itoa(t.Day()) + "\u00a0" + k.list("office.day.mon", int(t.Month())-1)
}

// longDay writes Tuesday 1 December 2026.
func (k ink) longDay(d forms.Day) string {
	if d == forms.NoDay {
		return dash
	}
	t := d.Time()
	return k.list("office.day.wd_long", int(t.Weekday())) + " " + strconv.Itoa(t.Day()) + " " + k.list("office.day.mon_long", int(t.Month())-1) + " " + strconv.Itoa(t.Year())
}

// at writes a moment in a zone: 3 Nov 2026, 07:52.
func (k ink) at(t time.Time, zone *time.Location) string {
	if t.IsZero() {
		return dash
	}
	t = t.In(zone)
	return k.day(forms.DayOf(t)) + ", " + t.Format("15:04")
}

// duration writes how long something took in its largest whole unit.
func (k ink) duration(d time.Duration) string {
	switch h := int(d.Hours()); {
	case h >= 48:
		return k.say("office.every.d", "n", h/24)
	case h >= 2:
		return k.say("office.every.h", "n", h)
	}
	return k.say("office.every.min", "n", int(d.Minutes()))
}

// number writes a figure with its digits in groups of three from 1 000 on, at most 6 significant digits.
func number(v float64) string {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return dash
	}
	s := strconv.FormatFloat(v, 'g', 6, 64)
	if strings.Contains(s, "e") {
		s = strconv.FormatFloat(v, 'f', -1, 64)
	}
	sign := ""
	if strings.HasPrefix(s, "-") {
		sign, s = "−", s[1:]
	}
	whole, rest, point := strings.Cut(s, ".")
	for i := len(whole) - 3; i > 0; i -= 3 {
		whole = whole[:i] + thin + whole[i:]
	}
	if point {
		whole += "." + rest
	}
	return sign + whole
}

// limitFigure writes a computed limit with no more digits than anybody reads: whole ms, hundredths below ten.
func limitFigure(v float64) string {
	switch a := math.Abs(v); {
	case a >= 100:
		return number(math.Round(v))
	case a >= 10:
		return number(math.Round(v*10) / 10)
	default:
		return number(math.Round(v*1000) / 1000)
	}
}

func count(n int) string { return number(float64(n)) }

// amount writes a figure with its unit.
func (k ink) amount(figure, unit string) string {
	if unit == "" {
		return figure
	}
	return figure + thin + k.named("unit", unit)
}

// unitOf is the unit a reading's value is kept in; empty where it has none.
func unitOf(code string) string {
	c, _ := forms.CodeOf(code)
	return c.Unit
}

// tag writes K7Q-M2P-3 with hyphens that do not break.
func (k ink) tag(tag string) string {
	return strings.ReplaceAll(showTag(tag), "-", hyphen)
}

// reading names a reading by its code.
func (k ink) reading(code string) string {
	if name := k.own[code]; name != "" {
		return name
	}
	if key := "reading." + code + ".name"; k.words.Has(key) {
		return k.say(key)
	}
	return code
}

// answer writes an answer that is a word of a closed list.
func (k ink) answer(code, value string) string {
	if key := "option." + code + "." + value; k.words.Has(key) {
		return k.say(key)
	}
	switch value {
	case "yes", "no":
		return k.say("office." + value)
	}
	return value
}

// value writes what a reading says: a figure with its unit, an answer, a bound, or why there is none.
func (k ink) value(code string, r forms.Reading) string {
	unit := unitOf(code)
	switch {
	case r.Missing != "":
		return k.say("office.entry.missing", "reason", k.named("missing", r.Missing))
	case r.Above != nil && r.NoTrip:
		return k.say("office.entry.no_trip") + ", " + k.say("office.entry.above", "value", k.amount(number(*r.Above), unit))
	case r.Above != nil:
		return k.say("office.entry.above", "value", k.amount(number(*r.Above), unit))
	case r.Below != nil:
		return k.say("office.entry.below", "value", k.amount(number(*r.Below), unit))
	case r.NoTrip:
		return k.say("office.entry.no_trip")
	}
	switch v := r.Value.(type) {
	case float64:
		return k.amount(number(v), unit)
	case string:
		return k.answer(code, v)
	case bool:
		if v {
			return k.answer(code, "yes")
		}
		return k.answer(code, "no")
	}
	return dash
}

// typed tells what was typed, where that was in another unit than the value is kept in.
func (k ink) typed(code string, r forms.Reading) string {
	if r.Typed == "" || r.Unit == "" || r.Unit == unitOf(code) {
		return ""
	}
	return k.say("office.entry.typed", "text", r.Typed, "unit", k.named("unit", r.Unit))
}

// limit writes a limit in words: at most 4 677 ms.
func (k ink) limit(code string, b *forms.Bounds, level string) string {
	if b == nil {
		return ""
	}
	unit := unitOf(code)
	text := ""
	switch {
	case b.Min != nil && b.Max != nil:
		text = k.say("office.entry.limit_band", "min", limitFigure(*b.Min), "max", k.amount(limitFigure(*b.Max), unit))
	case b.Max != nil:
		text = k.say("office.entry.limit_max", "max", k.amount(limitFigure(*b.Max), unit))
	case b.Min != nil:
		text = k.say("office.entry.limit_min", "min", k.amount(limitFigure(*b.Min), unit))
	case len(b.OneOf) > 0:
		var names []string
		for _, v := range b.OneOf {
			names = append(names, lowerFirst(k.answer(code, v)))
		}
		key := "office.entry.limit_one"
		if level == "watch" {
			key = "office.entry.limit_watch_one"
		}
		return k.say(key, "list", strings.Join(names, k.say("office.limits.or")))
	}
	if level == "watch" && text != "" {
		text += ", " + k.say("office.entry.recommended")
	}
	return text
}

func lowerFirst(s string) string {
	if s == "" {
		return s
	}
	r := []rune(s)
	if len(r) > 1 && strings.ToUpper(string(r[1])) == string(r[1]) && r[1] != ' ' {
		return s // GFCI, RCD
	}
	return strings.ToLower(string(r[0])) + string(r[1:])
}

// mark is a verdict as it is shown: word, shape and colour together.
type mark struct{ Shape, Word string }

// shapes of results and findings; whatever is not here is shown as not tested.
var shapes = map[string]string{
	forms.Pass: "pass", forms.ConditionalPass: "watch", forms.Watch: "watch", forms.ConditionalFail: "watch", forms.Fail: "fail",
}

func shapeOf(result string) string {
	if s, ok := shapes[result]; ok {
		return s
	}
	return "none"
}

func (k ink) verdict(result string) mark {
	if result == "" {
		return mark{"none", k.say("office.device.not_tested")}
	}
	return mark{shapeOf(result), k.named("verdict", result)}
}
