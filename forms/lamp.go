package forms

// Lamps is what the three lamps of a plug-in tester show, and what that may be: trade names, common practice; the
// conditions that read alike follow from which conductors the lamps lie between.
type Lamps struct {
	HotNeutral, HotGround, NeutralGround bool
	Wiring                               string   // what the tester says, an answer of the reading wiring
	AlsoReads                            []string // conditions that light the same lamps
}

// LampTable lists the patterns three lamps have a name for.
func LampTable() []Lamps {
	return []Lamps{
		{true, true, false, "correct", []string{"neutral-ground-exchanged", "neutral-ground-tied", "hot-on-neutral-and-ground", "weak-conductor"}},
		{true, false, false, "open-ground", []string{"open-ground-and-reversed"}},
		{false, true, false, "open-neutral", nil},
		{false, false, false, "open-hot", []string{"circuit-off", "tripped-ahead"}},
		{false, true, true, "hot-ground-reversed", []string{"open-neutral-with-load"}},
		{true, false, true, "hot-neutral-reversed", nil},
	}
}
