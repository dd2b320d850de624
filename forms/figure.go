package forms

import (
	"fmt"
	"regexp"
	"strconv"
	"strings"
)

// Figure is what a person typed for a number: in the office, on a phone, in a sheet.
type Figure struct {
	Value float64
	Bound string // "" | BoundBelow (<0.1) | BoundAbove (>1999) | BoundOver (OL: above what the instrument shows, without a figure)
	Unit  string // as it was written behind the figure, "" where none was
}

// Bounds of a figure.
const (
	BoundBelow = "below"
	BoundAbove = "above"
	BoundOver  = "over"
)

var (
	figureShape = regexp.MustCompile(`^([<>≤≥]=?|=)?\s*([+-]?\d[\d.,'’\x{a0}\x{202f}\x{2009} ]*|[+-]?[.,]\d+)\s*([^\d\s.,][^\s]{0,11}(?:\s\S{1,8})?)?$`)
	overRange   = regexp.MustCompile(`(?i)^[+>]?\s*(?:o\.?l\.?|0\.?l\.?|o/?r|over(?:[- ]?(?:load|range|limit))?|ovrng|out of range|∞|inf)\s*(\S{0,8})$`)
	pointGroups = regexp.MustCompile(`^[+-]?[1-9]\d{0,2}(\.\d{3})+,\d+$`)
	commaGroups = regexp.MustCompile(`^[+-]?[1-9]\d{0,2}(,\d{3})+\.\d+$`)
	spaceGroups = regexp.MustCompile(`^[+-]?\d{1,3}([ '’\x{a0}\x{202f}\x{2009}]\d{3})+([.,]\d*)?$`)
	manyCommas  = regexp.MustCompile(`^[+-]?[1-9]\d{0,2}(,\d{3}){2,}$`)
	manyPoints  = regexp.MustCompile(`^[+-]?[1-9]\d{0,2}(\.\d{3}){2,}$`)
	oneComma    = regexp.MustCompile(`^[+-]?[1-9]\d{0,2},\d{3}$`)
	plainDigits = regexp.MustCompile(`^[+-]?(\d{1,15}|\d{1,15}[.,]\d{0,15}|[.,]\d{1,15})$`)
)

const textNoFigure = "This is no figure. Write it with digits and one point, such as 0.3."

// ParseFigure reads a figure the one way there is, the same as static/number.mjs (testdata/figures.json): a decimal point
// or a decimal comma; thousands parted by spaces or apostrophes, or by the mark that is not the decimal one. What could be
// two figures is refused with both of them named, never guessed: 1,234 is a thousand to one reader and a little over one to
// another. comma says that the source writes a decimal comma, so that it is neither. The minus of typographers is a minus.
func ParseFigure(typed string, comma bool) (Figure, error) {
	s := strings.ReplaceAll(strings.Join(strings.Fields(typed), " "), "\u2212", "-")
	if m := overRange.FindStringSubmatch(s); m != nil {
		return Figure{Bound: BoundOver, Unit: m[1]}, nil
	}
	m := figureShape.FindStringSubmatch(s)
	if m == nil || len(s) > 60 {
		return Figure{}, invalid("", textNoFigure)
	}
	f := Figure{Unit: m[3]}
	switch {
	case strings.HasPrefix(m[1], "<"), strings.HasPrefix(m[1], "≤"):
		f.Bound = BoundBelow
	case strings.HasPrefix(m[1], ">"), strings.HasPrefix(m[1], "≥"):
		f.Bound = BoundAbove
	}
	digits := strings.TrimSpace(m[2])
	switch {
	case commaGroups.MatchString(digits), manyCommas.MatchString(digits):
		digits = strings.ReplaceAll(digits, ",", "")
	case pointGroups.MatchString(digits), manyPoints.MatchString(digits):
		digits = strings.ReplaceAll(digits, ".", "")
	case spaceGroups.MatchString(digits):
		digits = strings.NewReplacer(" ", "", "'", "", "’", "", "\u00a0", "", "\u202f", "", "\u2009", "").Replace(digits)
	case oneComma.MatchString(digits) && !comma:
		return Figure{}, invalid("", fmt.Sprintf("This may be %s or %s. Write it without the comma, or with a point.",
			strings.Replace(digits, ",", "", 1), strings.Replace(digits, ",", ".", 1)))
	}
	if !plainDigits.MatchString(digits) {
		return Figure{}, invalid("", textNoFigure)
	}
	v, err := strconv.ParseFloat(strings.Replace(digits, ",", ".", 1), 64)
	if err != nil {
		return Figure{}, invalid("", textNoFigure)
	}
	f.Value = v
	return f, nil
}
