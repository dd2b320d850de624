package server

import (
	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

func (s *Server) defectNew(c echo.Context) error {
	d, site, err := s.deviceAt(c, c.Param("device"))
	if err != nil {
		return err
	}
	f, err := s.blankForm(map[string]string{"severity": forms.SeverityUnsafe})
	if err != nil {
		return err
	}
	return s.formBack(c, f, s.defectForm(c, site, d))
}

// defectOpen keeps a defect that somebody saw, with a photo where there is one.
func (s *Server) defectOpen(c echo.Context) error {
	d, site, err := s.deviceAt(c, c.Param("device"))
	if err != nil {
		return err
	}
	f, raw, err := s.typedUpload(c)
	if err != nil {
		return err
	}
	record, subject := f.id(recordField), f.id(subjectField)
	body := map[string]any{"device": d.ID, "text": f.needed("text", s.words.Say("office.defect.ask.what"), 500), "severity": f.choice("severity", forms.DefectSeverities()...)}
	if due := f.date("due"); due != forms.NoDay {
		body["due"] = due
	}
	if parts := partsOf(f.Get("parts")); len(parts) > 0 {
		body["parts"] = parts
	}
	photo := s.photoIn(f, raw, body)
	if f.ok() {
		err := s.append(c, store.Draft{ID: record, Kind: "defect.opened", Log: site.ID, Subject: subject, Body: body})
		if err == nil {
			if err := s.keepPhoto(c, record, photo); err != nil {
				return err
			}
			return toPage(c, "/defects/"+subject)
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.formBack(c, f, s.defectForm(c, site, d))
}

func (s *Server) defectForm(c echo.Context, site store.Site, d store.Device) formPage {
	k := s.ink()
	ask := func(name string) string { return k.say("office.defect.ask." + name) }
	var severities []string
	for _, severity := range forms.DefectSeverities() {
		severities = append(severities, severity, k.named("office.defect.severity_long", severity))
	}
	return formPage{
		Frame: s.frame(c, k.say("office.defect.new"), "defects"), Upload: true,
		Crumbs:  []link{{Href: siteHref(site), Text: site.Name}, {Href: "/devices/" + d.ID, Text: s.spot(d.DeviceRow)}},
		Heading: k.say("office.defect.new_head", "spot", s.spot(d.DeviceRow)), Lead: k.say("office.defect.new_lead"),
		Action: "/devices/" + d.ID + "/defects", Submit: k.say("office.defect.new"), Cancel: "/devices/" + d.ID,
		Groups: []fieldGroup{{Fields: []field{
			{Name: "text", Label: ask("what"), Required: true, Wide: true},
			{Name: "severity", Label: ask("severity"), Required: true, Options: choices("", severities...)},
			{Name: "due", Label: ask("due"), Type: "date"},
			{Name: "parts", Label: ask("parts"), Hint: k.say("office.defect.parts_hint"), Type: "text-area", Wide: true},
			{Name: fileField, Label: ask("photo"), Type: "photo", Hint: k.say("office.defect.photo_hint"), Wide: true},
		}}},
	}
}
