package server

import (
	"cmp"

	"tripwell/forms"
	"tripwell/store"
)

// itemsShown lists portable items that are not where they belong: those of a depot that are elsewhere, or those of other
// depots that are at a site.
type itemsShown struct {
	Heading string
	Rows    []itemRow
}

// itemRow is one item with where it is and when somebody last met it there.
type itemRow struct {
	Href, Name, Tag, Kind, Place, Said, Tested, Next string
	Late                                             bool
}

// itemsOfSite gives both lists of a site; the list of those elsewhere is made of the site's own rows, which its page has read.
func (s *Server) itemsOfSite(v *store.View, site store.Site, elsewhere []store.DeviceRow) (out []itemsShown, err error) {
	k, today := s.ink(), s.today(site)
	var away, here []itemRow
	for _, d := range elsewhere {
		w, err := v.Whereabouts(d)
		if err != nil {
			return nil, err
		}
		away = append(away, s.itemRow(v, w, s.siteAt(w), today))
	}
	guests, err := v.ItemsHere(site.ID)
	if err != nil {
		return nil, err
	}
	for _, w := range guests {
		here = append(here, s.itemRow(v, w, joined(k.say("office.item.of", "depot", w.Depot.Name), w.Item.Where), today))
	}
	if len(away) > 0 {
		out = append(out, itemsShown{k.say("office.item.elsewhere", "n", len(away)), away})
	}
	if len(here) > 0 {
		out = append(out, itemsShown{k.say("office.item.here", "n", len(here)), here})
	}
	return out, nil
}

func (s *Server) itemRow(v *store.View, w store.Whereabouts, place string, today forms.Day) itemRow {
	k, d := s.ink(), w.Item
	row := itemRow{Href: "/devices/" + d.ID, Name: s.spot(d), Tag: k.tag(d.Tag), Kind: k.named("kind", d.Kind), Place: place, Said: s.saidThere(v, w, today), Tested: dash}
	if row.Kind == row.Name {
		row.Kind = ""
	}
	if w.Tested != forms.NoDay {
		row.Tested = k.near(w.Tested, today)
	}
	row.Next, row.Late = s.nextOf(d, today)
	return row
}

// saidThere says since when an item is where it is, and who said so.
func (s *Server) saidThere(v *store.View, w store.Whereabouts, today forms.Day) string {
	if w.Said.IsZero() {
		return ""
	}
	return s.words.Say("office.item.since", "day", s.ink().near(forms.DayOf(w.Said.In(w.Depot.Location())), today), "by", s.personName(v, w.By))
}

// siteAt names where an item is: the site, and the spot there in words.
func (s *Server) siteAt(w store.Whereabouts) string {
	if w.At.ID == "" {
		return cmp.Or(w.Item.Where, s.words.Say("office.item.at_depot", "depot", w.Depot.Name))
	}
	return joined(cmp.Or(w.At.Name, s.words.Say("office.item.unseen_site")), w.Item.Where)
}

// whereNow says of a portable item in a list where to look for it; "" of anything that has a place. names holds the sites
// the reader sees, by id.
func (s *Server) whereNow(d store.DeviceRow, names map[string]string) string {
	switch {
	case !forms.IsPortable(d.Kind) || d.Place.ID != "":
		return ""
	case d.AtSite != "":
		return s.words.Say("office.item.now_at", "place", joined(cmp.Or(names[d.AtSite], s.words.Say("office.item.unseen_site")), d.Where))
	}
	return d.Where
}

// itemFacts are the register's lines about where an item belongs and where it is.
func (s *Server) itemFacts(v *store.View, d store.Device, today forms.Day) ([]fact, error) {
	if !forms.IsPortable(d.Kind) || d.Place.ID != "" {
		return nil, nil
	}
	w, err := v.Whereabouts(d.DeviceRow)
	if err != nil {
		return nil, err
	}
	k := s.ink()
	out := []fact{{Name: k.say("office.item.belongs"), Value: w.Depot.Name, Href: siteHref(w.Depot)},
		{Name: k.say("office.device.field.where"), Value: joined(s.siteAt(w), s.saidThere(v, w, today))}}
	if w.At.Code != "" {
		out[1].Href = siteHref(w.At)
	}
	return out, nil
}

// formerFact names the record a device was kept under before, where the reader sees it.
func (s *Server) formerFact(v *store.View, d store.Device, today forms.Day) []fact {
	id, _ := d.Fields["formerly"].(string)
	was, err := v.Device(id, today)
	if err != nil {
		return nil // of a site that is not the reader's, or never registered here
	}
	return []fact{{Name: s.words.Say("office.device.field.formerly"), Value: joined(s.spot(was.DeviceRow), was.SiteName), Href: "/devices/" + was.ID}}
}
