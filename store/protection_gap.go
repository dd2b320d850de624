package store

import (
	"cmp"
	"slices"

	"tripwell/forms"
)

// Why somebody should look at an outlet's protection, the worst first.
const (
	GapLive     = "live"     // stayed live while the device said to protect it was tripped
	GapFailed   = "failed"   // the best of what protects it failed
	GapRemoved  = "removed"  // …is out of service, and nothing took its place
	GapNoGround = "ground"   // no equipment ground and nothing that protects it: not permitted (NEC 406.4(D)(2))
	GapNone     = "none"     // nothing is known to protect it, and its place usually needs it or its kind says it is protected
	GapUntested = "untested" // the best of what protects it was never tested to the end
	GapOverdue  = "overdue"  // …is overdue
	GapMarking  = "marking"  // a marking is needed, and nobody has seen it there
	GapLoop     = "loop"     // what feeds it was said in a ring; the newest of that was left out
)

var gapOrder = []string{GapLive, GapFailed, GapRemoved, GapNoGround, GapNone, GapUntested, GapOverdue, GapMarking, GapLoop}

// ProtectionGap is one outlet and one reason to look at it.
type ProtectionGap struct {
	Device OnMap
	Why    string
	By     string           // the protector meant: it failed, is overdue …; the source left out of a ring; "" for none
	Usual  forms.UsualPlace // what its place is taken for, zero where it is none of the list
	ByName bool             // only the place's names say so
	// Marking the outlet needs where it has no equipment ground: forms.MarkingFor, by the names of
	// export.MarkingLabels.
	Marking string
	Defect  string // the open defect that says an outlet stayed live
}

// ProtectionGaps lists what of a site's protection somebody should look at on a day, worst first, then in walking order.
// It is the one reader for pages, the workbook, bundles and what a visit on a day will meet: those name the gaps, and never
// work them out anew. p is the map it was read from.
func (v *View) ProtectionGaps(site string, on forms.Day) (gaps []ProtectionGap, p *Protection, err error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return nil, nil, err
	}
	if p, err = v.SiteProtection(site, on); err != nil {
		return nil, nil, err
	}
	usual, _, err := v.UsualPlaces(site, on)
	if err != nil {
		return nil, nil, err
	}
	if usual != nil && usual.Standard != "" && sv.Standard != "" && usual.Standard != sv.Standard {
		usual = nil
	}
	live, err := v.foundLive(sv, on)
	if err != nil {
		return nil, nil, err
	}
	for _, d := range p.devices {
		if d.Retired {
			continue
		}
		of, err := v.gapsOf(p, d, usual, live[d.ID])
		if err != nil {
			return nil, nil, err
		}
		gaps = append(gaps, of...)
	}
	for _, f := range p.LeftOut() {
		if d, ok := p.devices[f.Device]; ok {
			gaps = append(gaps, ProtectionGap{Device: d, Why: GapLoop, By: f.Source})
		}
	}
	sortWalking(gaps, func(g ProtectionGap) (Place, string) { return g.Device.Place, g.Device.ID })
	slices.SortStableFunc(gaps, func(a, b ProtectionGap) int {
		return cmp.Compare(slices.Index(gapOrder, a.Why), slices.Index(gapOrder, b.Why))
	})
	return gaps, p, nil
}

func (v *View) gapsOf(p *Protection, d OnMap, usual *forms.UsualPlaces, live string) (gaps []ProtectionGap, err error) {
	if live != "" {
		gaps = append(gaps, ProtectionGap{Device: d, Why: GapLive, By: d.Source, Defect: live})
	}
	if !forms.IsOutlet(d.Kind) {
		return gaps, nil
	}
	kind, byName, listed := usual.Match(d.Place.Usual, d.Place.Name, d.Place.Room, d.Place.Floor, d.Place.Building)
	gap := ProtectionGap{Device: d, Usual: kind, ByName: byName}
	cover := p.Cover(d.ID)
	switch gap.By = cover.By; {
	case cover.State == forms.Unprotected && d.EquipmentGround == forms.NoGroundPermitted:
		gap.Why = GapNoGround
	case cover.State == forms.Unprotected && (listed || d.Kind == forms.ProtectedReceptacle):
		gap.Why = GapNone
	case cover.State != forms.Unprotected && cover.State != forms.StandsWell && cover.By != d.ID:
		gap.Why = cover.State
	}
	if gap.Why != "" {
		gaps = append(gaps, gap)
	}
	if d.EquipmentGround != forms.NoGroundPermitted || cover.State == forms.Unprotected {
		return gaps, nil
	}
	seen, err := v.markingSeen(d)
	if err == nil && !seen {
		gap.Why, gap.Marking = GapMarking, forms.MarkingFor(d.Kind)
		gaps = append(gaps, gap)
	}
	return gaps, err
}

// markingSeen tells whether the newest test that asked for a device's marking found it there.
func (v *View) markingSeen(d OnMap) (bool, error) {
	var seen, asked Entry
	for _, last := range d.Last {
		e, err := v.whole().Entry(last.id.String())
		if err != nil {
			return false, err
		}
		if r, ok := e.Body.Readings["marking_present"]; ok && r.Missing == "" && (asked.ID == "" || e.Day > asked.Day) {
			asked = e
			if seen = (Entry{}); r.Value == "yes" {
				seen = e
			}
		}
	}
	return seen.ID != "", nil
}

// foundLive gives the devices that stayed live while what protects them was tripped, by open defect.
func (v *View) foundLive(sv *siteView, on forms.Day) (map[string]string, error) {
	defects, err := v.Defects(DefectAsk{Site: sv.ID, On: on})
	if err != nil {
		return nil, err
	}
	live := map[string]string{}
	for _, d := range defects {
		if d.Cause == "load_dead_when_tripped" || d.Cause == "protection-lost" {
			live[d.Device.ID] = d.ID
		}
	}
	return live, nil
}
