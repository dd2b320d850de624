package forms

import (
	"strconv"
	"strings"
)

// PerLength is what a conductor may have by its length: Base + length in m × ohms per m of its size, in ohm. Sizes are
// written "14" (AWG) or "2.5mm2".
type PerLength struct {
	Base    float64            `json:"base"`
	OhmPerM map[string]float64 `json:"ohm_per_m"`
}

// conductorSize writes a conductor size as PerLength has it: "14 AWG", "#14" and "AWG 14" are "14"; "2.5 mm²" is "2.5mm2".
func conductorSize(gauge any) string {
	if number, ok := gauge.(float64); ok {
		return strconv.FormatFloat(number, 'f', -1, 64)
	}
	text, _ := gauge.(string)
	return conductorSpelling.Replace(strings.ToLower(text))
}

var conductorSpelling = strings.NewReplacer(" ", "", "awg", "", "#", "", "²", "2", "sqmm", "mm2", ",", ".")

// applyLength finds the most a conductor may have; without its length and size nothing is judged.
func (f *facts) applyLength(l *Limit, a *Applied) {
	length, ok := f.field("length_m").(float64)
	perM, known := l.PerLength.OhmPerM[conductorSize(f.field("gauge"))]
	if !ok || !known {
		a.Text = "limit.no_length"
		return
	}
	most := round9(l.PerLength.Base + float64(length*perM))
	a.Limit = &Bounds{Max: &most}
}
