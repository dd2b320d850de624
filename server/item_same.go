package server

import (
	"slices"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// A portable item met where nobody had its depot's register is taken in there as a new one and tested at once. Its label then
// names two things, and a manager of both says that they are one: the tests of the other go into this one's log, word for
// word and named by the entry they come from, so that doing it twice makes them once; the other is retired.

// itemsLike are the other holders of an item's label that may be the same thing.
func (s *Server) itemsLike(v *store.View, d store.Device) (out []store.Device, err error) {
	if !forms.IsPortable(d.Kind) || d.Retired || d.Tag == "" || len(d.TagClash) == 0 {
		return nil, nil
	}
	holders, err := v.Tag(d.Tag)
	if err != nil {
		return nil, err
	}
	for _, h := range holders {
		if h.Device == "" || h.Device == d.ID {
			continue
		}
		other, err := v.Device(h.Device, forms.DayOf(s.store.Now()))
		if err != nil {
			return nil, err
		}
		if forms.IsPortable(other.Kind) && !other.Retired {
			out = append(out, other)
		}
	}
	return out, nil
}

func (s *Server) itemSameAsk(c echo.Context) error {
	d, others, err := s.itemAndLike(c)
	if err != nil {
		return err
	}
	f, err := s.blankForm(map[string]string{"other": others[0].ID})
	if err != nil {
		return err
	}
	return s.formBack(c, f, s.itemSameForm(c, d, others))
}

func (s *Server) itemSame(c echo.Context) error {
	d, others, err := s.itemAndLike(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	first := f.id(recordField)
	at := slices.IndexFunc(others, func(o store.Device) bool { return o.ID == f.Get("other") })
	if at < 0 {
		f.refuse("other", s.words.Say("office.form.choice"))
	}
	if f.ok() {
		drafts, err := s.itemSameDrafts(c, first, d, others[at])
		if err == nil {
			err = s.append(c, drafts...)
		}
		if err == nil {
			return toPage(c, "/devices/"+d.ID)
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.formBack(c, f, s.itemSameForm(c, d, others))
}

func (s *Server) itemAndLike(c echo.Context) (d store.Device, others []store.Device, err error) {
	err = s.store.View(scope(c), func(v *store.View) (err error) {
		if d, err = v.Device(c.Param("device"), forms.DayOf(s.store.Now())); err != nil {
			return err
		}
		if others, err = s.itemsLike(v, d); err == nil && len(others) == 0 {
			err = refuse(codeInvalid, "", s.words.Say("office.item.none_like"))
		}
		return err
	})
	return d, others, err
}

// itemSameDrafts are the records that make one item of two: the tests, what it was registered as, the end of the other.
func (s *Server) itemSameDrafts(c echo.Context, first string, d, other store.Device) (drafts []store.Draft, err error) {
	err = s.store.View(scope(c), func(v *store.View) error {
		entries, err := v.Entries(other.ID)
		for _, e := range slices.Backward(entries) {
			if e.Withdrawn == nil && e.Sealed == nil {
				drafts = append(drafts, store.Draft{ID: record.NamedID("same item", d.ID, e.ID), Kind: "entry.imported", Log: d.Site, Subject: d.ID, Body: s.handedOn(e)})
			}
		}
		return err
	})
	if err != nil {
		return nil, err
	}
	set := map[string]any{"formerly": other.ID}
	if other.Site != d.Site {
		set["at_site"] = other.Site
	}
	if other.Where != "" {
		set["where"] = other.Where
	}
	subject := other.ID
	if other.Place.ID != "" {
		subject = other.Place.ID
	}
	return append(drafts, store.Draft{ID: first, Kind: "device.set", Log: d.Site, Subject: d.ID, Body: map[string]any{"set": set}},
		store.Draft{ID: record.NamedID(first, "freed"), Kind: "tag.freed", Log: other.Site, Subject: subject, Body: map[string]any{"tag": d.Tag}},
		store.Draft{ID: record.NamedID(first, "retired"), Kind: "device.retired", Log: other.Site, Subject: other.ID,
			Body: map[string]any{"reason": s.words.Say("office.item.same_reason", "site", d.SiteName), "on": forms.DayOf(s.store.Now())}}), nil
}

// handedOn is the body of a test that goes into another log: what was measured, as it stands, and who read it.
func (s *Server) handedOn(e store.Entry) map[string]any {
	body := map[string]any{"form": e.Form, "day": e.Day, "source": e.Source, "note": joined(s.words.Say("office.item.handed_on"), e.Note)}
	if e.Body.Readings == nil {
		body["result"] = e.Verdict.Result
		return body
	}
	body["given"], body["readings"], body["read_by"] = e.Body.Given, e.Body.Readings, e.ReadBy
	if body["typed_by"] = e.TypedBy; e.ReadBy == "" {
		body["read_by"] = e.By
	}
	if len(e.Body.Series) > 0 {
		body["series"] = e.Body.Series
	}
	return body
}

func (s *Server) itemSameForm(c echo.Context, d store.Device, others []store.Device) formPage {
	k := s.ink()
	var offered []option
	for _, o := range others {
		offered = append(offered, option{Value: o.ID, Text: joined(s.spot(o.DeviceRow), o.SiteName)})
	}
	return formPage{
		Frame:   s.frame(c, k.say("office.item.same"), "sites"),
		Crumbs:  []link{{Href: "/sites/" + d.SiteCode, Text: d.SiteName}, {Href: "/devices/" + d.ID, Text: s.spot(d.DeviceRow)}},
		Heading: k.say("office.item.same_head", "tag", k.tag(d.Tag)), Lead: k.say("office.item.same_lead", "depot", d.SiteName),
		Action: "/devices/" + d.ID + "/same", Submit: k.say("office.item.same_save", "depot", d.SiteName), Cancel: "/devices/" + d.ID, Grave: true,
		Groups: []fieldGroup{{Fields: []field{{Name: "other", Label: k.say("office.item.same_other"), Required: true, Options: offered}}}},
	}
}
