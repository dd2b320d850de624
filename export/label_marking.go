package export

import (
	"fmt"
	"slices"
	"strings"

	"tripwell/store"
)

// markings are the words the electrical code asks for on a replacement where the box has no equipment ground (NFPA 70,
// 406.4(D)(2)(b) and (c)). They are prescribed, so they stand in no catalogue.
var markings = map[string][]string{
	"gfci-protected":      {"GFCI PROTECTED"},
	"no-equipment-ground": {"NO EQUIPMENT GROUND"},
	"both":                {"GFCI PROTECTED", "NO EQUIPMENT GROUND"},
}

// MarkingNames lists the markings MarkingLabels knows: a receptacle of the grounding type that a GFCI feeds carries both,
// a GFCI itself only no-equipment-ground.
func MarkingNames() []string { return []string{"both", "gfci-protected", "no-equipment-ground"} }

// markingMost bounds one call.
const markingMost = 5000

// MarkingLabels makes n labels of a marking.
func MarkingLabels(name string, n int) ([]Label, error) {
	marking, ok := markings[name]
	if !ok {
		return nil, &store.Error{Code: "invalid", Field: "marking", Text: fmt.Sprintf("There is no marking %q. Choose one of: %s.", cut(name), strings.Join(MarkingNames(), ", "))}
	}
	if n < 1 || n > markingMost {
		return nil, &store.Error{Code: "invalid", Field: "count", Text: fmt.Sprintf("Between 1 and %d labels can be made at a time.", markingMost)}
	}
	return slices.Repeat([]Label{{Marking: marking}}, n), nil
}
