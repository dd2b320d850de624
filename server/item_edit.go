package server

import (
	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// travels tells a portable item without a place of its own, of which a form asks where it is instead.
func travels(d *store.Device) bool { return d != nil && forms.IsPortable(d.Kind) && d.Place.ID == "" }

// itemGroup asks where a portable item is now.
func (s *Server) itemGroup(c echo.Context, depot store.Site, d *store.Device, q func(name string, more ...func(*field)) field) fieldGroup {
	k := s.ink()
	return fieldGroup{Legend: k.say("office.item.group"), Note: k.say("office.item.group_note", "depot", depot.Name), Fields: []field{
		q("at_site", func(f *field) { f.Options = s.itemSites(c, depot, d) }),
		q("name", func(f *field) { f.Label, f.Hint = k.say("office.item.ask_where"), k.say("office.item.hint_where") }),
	}}
}

// itemSites are the sites an item may be said to be at: its depot first, then the reader's others; one it is at that the
// reader does not see stays among them.
func (s *Server) itemSites(c echo.Context, depot store.Site, d *store.Device) []option {
	k := s.ink()
	out := []option{{Value: "", Text: k.say("office.item.at_depot", "depot", depot.Name)}}
	unseen := d.AtSite != ""
	err := s.store.View(scope(c), func(v *store.View) error {
		sites, err := v.Sites()
		for _, site := range sites {
			if site.ID != depot.ID {
				out = append(out, option{Value: site.ID, Text: site.Name})
			}
			unseen = unseen && site.ID != d.AtSite
		}
		return err
	})
	if err != nil || unseen {
		out = append(out, option{Value: d.AtSite, Text: k.say("office.item.unseen_site")})
	}
	return out
}

// itemInput takes what a form said of the place of a kind that travels for where it is kept: it has no place of its own.
func (s *Server) itemInput(f *typedForm, in *deviceInput, d *store.Device) {
	if !forms.IsPortable(f.Get("kind")) || d != nil && d.Place.ID != "" || f.Get("place") != "" {
		return
	}
	var said []string
	for _, name := range []string{"building", "floor", "room", "name"} {
		said = append(said, f.line(name, 120))
	}
	in.place = map[string]any{}
	if f.changed("name") || d == nil {
		if in.device["where"] = nil; joined(said...) != "" {
			in.device["where"] = joined(said...)
		}
	}
}

// atSiteInput reads at which site an item is now.
func (s *Server) atSiteInput(c echo.Context, f *typedForm, in *deviceInput, depot store.Site, d *store.Device) {
	if !f.Has("at_site") || !travels(d) {
		return
	}
	var allowed []string
	for _, o := range s.itemSites(c, depot, d) {
		allowed = append(allowed, o.Value)
	}
	f.setText(in.device, "at_site", "at_site", f.choice("at_site", allowed...))
}
