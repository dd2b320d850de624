package server

import (
	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

func (s *Server) deviceRetireAsk(c echo.Context) error {
	d, site, err := s.deviceAt(c, c.Param("device"))
	if err != nil {
		return err
	}
	f, err := s.blankForm(map[string]string{"on": s.today(site).String()})
	if err != nil {
		return err
	}
	return s.formBack(c, f, s.retireForm(c, site, d))
}

func (s *Server) deviceRetire(c echo.Context) error {
	d, site, err := s.deviceAt(c, c.Param("device"))
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	record := f.id(recordField)
	reason := f.needed("reason", s.words.Say("office.device.retire_reason"), 500)
	on := f.date("on")
	switch {
	case on == forms.NoDay && f.wrong["on"] == "":
		f.refuse("on", s.words.Say("office.form.day"))
	case on > s.today(site):
		f.refuse("on", s.words.Say("office.form.future"))
	}
	if f.ok() {
		err := s.append(c, store.Draft{ID: record, Kind: "device.retired", Log: site.ID, Subject: d.ID, Body: map[string]any{"reason": reason, "on": on}})
		if err == nil {
			return toPage(c, "/devices/"+d.ID)
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.formBack(c, f, s.retireForm(c, site, d))
}

func (s *Server) retireForm(c echo.Context, site store.Site, d store.Device) formPage {
	k := s.ink()
	return formPage{
		Frame:   s.frame(c, k.say("office.device.retire"), "sites"),
		Crumbs:  []link{{Href: siteHref(site), Text: site.Name}, {Href: "/devices/" + d.ID, Text: s.spot(d.DeviceRow)}},
		Heading: k.say("office.device.retire_head", "spot", s.spot(d.DeviceRow)), Lead: k.say("office.device.retire_lead"),
		Action: "/devices/" + d.ID + "/retire", Submit: k.say("office.device.retire_save"), Cancel: "/devices/" + d.ID, Grave: true,
		Groups: []fieldGroup{{Fields: []field{
			{Name: "reason", Label: k.say("office.device.retire_reason"), Required: true, Wide: true},
			{Name: "on", Label: k.say("office.device.retire_on"), Type: "date", Required: true},
		}}},
	}
}
