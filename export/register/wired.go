package register

import (
	"cmp"
	"strings"

	"tripwell/export/intake"
	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// What a row says of other things than its own device is put into ids here: the kind of place it is on the list of usual
// places, the site a portable item is at, and what feeds it, which may stand on a later row.

// fedRow is a row that names what feeds its device.
type fedRow struct {
	at    RowAt
	row   Row
	site  store.Site
	id    string
	named string
	have  any
	isNew bool
}

// warn says what of a row is not taken; the rest of the row is.
func (p *planner) warn(row *Row, column, value, text string) {
	p.plan.Problems = append(p.plan.Problems, Problem{intake.Problem{Sheet: row.Sheet, Row: row.Line, Column: column, Value: cut(value), Text: text}, false})
}

// usual puts the kind of a place into its id; it may be written by its name.
func (p *planner) usual(site store.Site, row *Row) {
	said, is := row.Place["usual"].(string)
	if !is {
		return
	}
	if intake.Label(said) == forms.NoUsualPlace {
		row.Place["usual"] = forms.NoUsualPlace
		return
	}
	list := p.usuals[site.ID]
	if list == nil {
		list = p.usuals[""]
	}
	if list != nil {
		for _, place := range list.Places {
			if place.Place == said || intake.Label(place.Name) == intake.Label(said) {
				row.Place["usual"] = place.Place
				return
			}
		}
	}
	delete(row.Place, "usual")
	p.warn(row, "usual_place", said, "The list of places that usually need protection has no such kind. Write one of its names, or none.")
}

// whereNow puts the site a portable item is at into its id; at its own depot it is at no other.
func (p *planner) whereNow(site store.Site, d *rowDevice, row *Row) {
	said, is := row.Device["at_site"].(string)
	if !is {
		return
	}
	delete(row.Device, "at_site")
	id, known := p.codes[strings.ToUpper(said)]
	switch {
	case !forms.IsPortable(fieldText(row.Device, "kind")):
		p.warn(row, "now_at", said, "Only a portable item is at another site than its own. Leave it empty.")
	case strings.EqualFold(said, site.Code):
		if d.was != nil && d.was.Fields["at_site"] != nil {
			row.Device["at_site"] = nil
		}
	case !known:
		p.warn(row, "now_at", said, "There is no site of this code, or it is not one of yours. Write the code of a site.")
	default:
		row.Device["at_site"] = id
	}
}

// feeds keeps what a row says feeds its device until every row is known.
func (p *planner) feeds(site store.Site, d *rowDevice, row *Row) {
	said, is := row.Device["fed_by"].(string)
	if !is {
		return
	}
	delete(row.Device, "fed_by")
	one := fedRow{at: RowAt{row.Sheet, row.Line}, row: *row, site: site, id: d.id, named: said, isNew: d.was == nil}
	if d.was != nil {
		one.have = d.was.Fields["fed_by"]
	}
	p.fed = append(p.fed, one)
}

// standing is a device a row may name as its source.
type standing struct{ id, spot, whole string }

// note keeps a device by what a row may name it with.
func (p *planner) note(site, id, tag, building, floor, room, spot string) {
	whole := intake.Label(strings.Join([]string{building, floor, room, spot}, " "))
	p.stand[site] = append(p.stand[site], standing{id, intake.Label(spot), whole})
	if tag != "" {
		p.tagAt[site+tag] = id
	}
}

// source finds the device that is named by its tag, its id, its whole place or its spot alone; many is true where several
// devices answer to it.
func (p *planner) source(site, named string) (id string, many bool) {
	if tag, ok := record.ParseTag(named); ok && p.tagAt[site+tag] != "" {
		return p.tagAt[site+tag], false
	}
	label := intake.Label(strings.ReplaceAll(named, "·", " "))
	for _, by := range []func(standing) bool{
		func(s standing) bool { return s.id == named }, func(s standing) bool { return s.whole == label }, func(s standing) bool { return s.spot == label },
	} {
		found := map[string]bool{}
		for _, s := range p.stand[site] {
			if by(s) {
				found[s.id], id = true, s.id
			}
		}
		if len(found) > 0 {
			return id, len(found) > 1
		}
	}
	return "", false
}

// wire drafts what feeds what, once all devices of the file are known.
func (p *planner) wire() {
	for _, f := range p.fed {
		id, many := p.source(f.site.ID, f.named)
		switch {
		case many:
			p.warn(&f.row, "hangs_on", f.named, "Several devices of this site answer to that. Write the tag of the one that feeds this.")
		case id == "":
			p.warn(&f.row, "hangs_on", f.named, "No device of this site answers to that. Write its tag, or its place as its own row has it.")
		case id == f.id:
			p.warn(&f.row, "hangs_on", f.named, "A device does not feed itself. Name the one whose LOAD terminals feed it.")
		case !sameValue(id, f.have):
			draftID := ""
			if f.isNew {
				draftID = p.importID("fed_by", f.row.Site, f.row.key(), id)
			}
			p.out = nil
			p.add(draftID, "device.set", f.site.ID, f.id, map[string]any{"fed_by": id})
			p.plan.Rows = append(p.plan.Rows, RowDrafts{Line: f.at.Row, Drafts: p.out})
			if p.plan.States[f.at] == "unchanged" {
				p.plan.States[f.at] = "changed"
				p.plan.Unchanged--
				p.plan.Changed++
			}
		}
	}
}

// noteKnown keeps the devices the store holds, so that rows may name them.
func (p *planner) noteKnown() {
	for _, d := range p.byID {
		p.note(d.Site, d.ID, d.Tag, d.Place.Building, d.Place.Floor, d.Place.Room, cmp.Or(d.Place.Name, fieldText(d.Fields, "where")))
	}
}
