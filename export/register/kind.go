package register

import (
	"strings"

	"tripwell/export/intake"
	"tripwell/forms"
)

// kindWords are words of the trade for kinds of device, in plain form. Words that may mean two kinds (GFCI, breaker)
// are taken for the one that nearly all registers mean where there is one, and are left out where there is none.
var kindWords = map[string]string{
	"gfci": forms.GFCIReceptacle, "gfi": forms.GFCIReceptacle, "gfci_outlet": forms.GFCIReceptacle, "gfi_outlet": forms.GFCIReceptacle, "gfci_recept": forms.GFCIReceptacle, "gfi_receptacle": forms.GFCIReceptacle,
	"gfci_duplex": forms.GFCIReceptacle, "duplex_gfci": forms.GFCIReceptacle, "gfci_recep": forms.GFCIReceptacle, "receptacle_gfci": forms.GFCIReceptacle, "outlet_gfci": forms.GFCIReceptacle,
	"gfci_circuit_breaker": forms.GFCIBreaker, "gfi_breaker": forms.GFCIBreaker, "breaker_gfci": forms.GFCIBreaker, "gfci_cb": forms.GFCIBreaker, "gfci_bkr": forms.GFCIBreaker, "dual_breaker": forms.GFCIBreaker,
	"receptacle_behind_a_gfci": forms.ProtectedReceptacle, "downstream": forms.ProtectedReceptacle, "gfci_protected": forms.ProtectedReceptacle, "downstream_receptacle": forms.ProtectedReceptacle,
	"load_side": forms.ProtectedReceptacle, "protected": forms.ProtectedReceptacle, "protected_outlet": forms.ProtectedReceptacle, "gfci_protected_receptacle": forms.ProtectedReceptacle,
	"recept": forms.PlainReceptacle, "recep": forms.PlainReceptacle, "outlet": forms.PlainReceptacle, "duplex": forms.PlainReceptacle, "duplex_receptacle": forms.PlainReceptacle, "duplex_outlet": forms.PlainReceptacle, "socket": forms.PlainReceptacle, "socket_outlet": forms.PlainReceptacle,
	"hospital_grade": forms.HospitalReceptacle, "hg_receptacle": forms.HospitalReceptacle, "hospital_grade_receptacle": forms.HospitalReceptacle, "hospital_outlet": forms.HospitalReceptacle,
	"cord": forms.CordSet, "extension_cord": forms.CordSet, "ext_cord": forms.CordSet, "cords": forms.CordSet,
	"portable_gfi": forms.PortableGFCI, "gfci_cord": forms.PortableGFCI, "inline_gfci": forms.PortableGFCI, "in_line_gfci": forms.PortableGFCI,
	"plug_in_equipment": forms.PlugInEquipment, "portable_equipment": forms.PlugInEquipment, "appliance": forms.PlugInEquipment,
	"rccb": forms.RCD, "fi": forms.RCD, "fi_schalter": forms.RCD, "residual_current_device": forms.RCD, "fi_ls": forms.RCBO,
}

// kindNamed finds a device kind: by the person's own words for this file, by its id in any spelling ("GFCI receptacle"
// is gfci-receptacle), or by a word of the trade.
func (m Mapping) kindNamed(s string) (string, bool) {
	label := intake.Label(s)
	for word, kind := range m.Kinds {
		if intake.Label(word) == label && kind != "" {
			return kind, true
		}
	}
	id := strings.ReplaceAll(label, "_", "-")
	for _, kind := range forms.Kinds() {
		if kind == id {
			return kind, true
		}
	}
	kind, ok := kindWords[label]
	return kind, ok
}
