package export

import (
	"tripwell/store"
)

// GapLine is a gap in protection with its site; ByText names the protector meant.
type GapLine struct {
	Site store.Site
	store.ProtectionGap
	ByText string
}

var gapColumns = []column{
	{"site_code", 10, textCell}, {"tag", 12, textCell}, {"place", 36, textCell}, {"kind", 22, textCell}, {"gap", 40, textCell}, {"protector", 36, textCell}, {"marking", 40, textCell},
	{"device_id", 38, textCell},
}

func (b *book) gaps() error {
	s, err := b.sheet("gaps", gapColumns)
	if err != nil {
		return err
	}
	for _, g := range b.src.Gaps {
		d := g.Device
		err := s.row().text(g.Site.Code).text(TagText(d.Tag)).text(PlaceText(d.Place)).text(b.word("kind", d.Kind)).text(b.say("office.protection.gap." + g.Why)).text(g.ByText).
			text(g.Marking).text(d.ID).end()
		if err != nil {
			return err
		}
	}
	return s.close()
}
