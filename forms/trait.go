package forms

import (
	"slices"
	"strconv"
	"strings"
)

// Trait is something the register says of a device because a condition of a form or a limit asks for it, where not every
// device has it.
type Trait struct {
	Field    string
	Options  []string // what it may say; none: a figure or a text
	Figure   bool
	Unit     string
	Kinds    []string // the devices it is asked of
	Standard string   // asked only at sites under NEC or IEC; empty: at all
}

// YesNo are the options of a trait that is held as true or false.
var YesNo = []string{"yes", "no"}

var (
	outlets  = []string{GFCIReceptacle, ProtectedReceptacle, PlainReceptacle, HospitalReceptacle}
	supplied = []string{GFCIReceptacle, ProtectedReceptacle, PlainReceptacle, HospitalReceptacle, GFCIBreaker, PortableGFCI}
	hospital = []string{HospitalReceptacle}
	cords    = []string{CordSet, PlugInEquipment}
	residual = []string{RCD, RCBO}
)

// traits stand in the order in which pages ask for them.
var traits = []Trait{
	{Field: "faces", Figure: true, Kinds: hospital},
	{Field: "locking", Options: YesNo, Kinds: hospital},
	{Field: "quiet_ground", Options: YesNo, Kinds: hospital},
	{Field: "new_construction", Options: YesNo, Kinds: hospital},
	{Field: "no_neutral", Options: YesNo, Kinds: append(slices.Clone(outlets), GFCIBreaker), Standard: "NEC"},
	{Field: "supply_edition", Options: []string{"2020", "1995"}, Kinds: supplied, Standard: "NEC"},
	{Field: "double_insulated", Options: YesNo, Kinds: []string{PlugInEquipment}},
	{Field: "gauge", Kinds: cords},
	{Field: "length_m", Figure: true, Unit: "m", Kinds: cords},
	{Field: "earthing", Options: []string{"tn", "tt"}, Kinds: residual},
	{Field: "distribution", Options: YesNo, Kinds: residual},
	{Field: "special_location", Options: YesNo, Kinds: residual},
}

// Traits lists them all, in the order in which pages ask for them.
func Traits() []Trait { return slices.Clone(traits) }

// TraitNamed finds one by its field.
func TraitNamed(field string) (Trait, bool) {
	i := slices.IndexFunc(traits, func(t Trait) bool { return t.Field == field })
	if i < 0 {
		return Trait{}, false
	}
	return traits[i], true
}

// TraitsOf lists what is asked of a kind at a site under a standard; an empty one asks as NEC.
func TraitsOf(kind, standard string) []Trait {
	var out []Trait
	for _, t := range traits {
		if slices.Contains(t.Kinds, kind) && (t.Standard == "" || t.Standard == standard || standard == "") {
			out = append(out, t)
		}
	}
	return out
}

// IsYesNo reports whether it is held as true or false.
func (t Trait) IsYesNo() bool { return slices.Equal(t.Options, YesNo) }

// GivenOf is what the judgement needs to know of a device, from its register fields and the supply of its circuit; the
// same as static/entry.mjs (testdata/given.json).
func GivenOf(kind string, fields map[string]any, supply string) Given {
	g := Given{Kind: kind, Supply: supply}
	g.RatedResidualMA, g.RatingA, g.NominalV = fieldFigure(fields["rated_residual_ma"]), fieldFigure(fields["rating_a"]), fieldFigure(fields["nominal_v"])
	g.Faces = int(fieldFigure(fields["faces"]))
	g.EquipmentGround, g.Waveform = fieldWord(fields["equipment_ground"]), fieldWord(fields["waveform"])
	g.Delayed = fieldFlag(fields["delayed"])
	for _, t := range traits {
		v := fields[t.Field]
		if v == nil || v == "" || t.Field == "faces" {
			continue
		}
		if g.Fields == nil {
			g.Fields = map[string]any{}
		}
		g.Fields[t.Field] = v
	}
	return g
}

func fieldFigure(v any) float64 {
	switch v := v.(type) {
	case float64:
		return v
	case string:
		if f, err := strconv.ParseFloat(strings.TrimSpace(v), 64); err == nil {
			return f
		}
	}
	return 0
}

func fieldWord(v any) string { s, _ := v.(string); return s }

func fieldFlag(v any) bool { return v == true || v == "yes" || v == "true" }
