package server

import (
	"regexp"
	"strings"
	"time"

	"github.com/labstack/echo/v4"

	"tripwell/store"
)

var siteCode = regexp.MustCompile(`^[A-Za-z0-9-]{2,12}$`)

// zonesOffered are time zones to choose from while typing; any IANA name may be typed.
var zonesOffered = []string{
	"America/New_York", "America/Chicago", "America/Denver", "America/Phoenix", "America/Los_Angeles", "America/Anchorage", "Pacific/Honolulu",
	"America/Toronto", "America/Vancouver", "America/Mexico_City", "America/Puerto_Rico", "Europe/London", "Europe/Dublin", "Europe/Berlin",
	"Europe/Madrid", "Europe/Paris", "Australia/Sydney", "Pacific/Auckland", "UTC",
}

func (s *Server) siteNew(c echo.Context) error {
	f, err := s.blankForm(map[string]string{"standard": "NEC"})
	if err != nil {
		return err
	}
	return s.formBack(c, f, s.siteForm(c, nil))
}

func (s *Server) siteCreate(c echo.Context) error {
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	record, subject := f.id(recordField), f.id(subjectField)
	code := strings.ToUpper(f.needed("code", s.words.Say("office.site.code"), 12))
	if code != "" && !siteCode.MatchString(code) {
		f.refuse("code", s.words.Say("office.form.code"))
	}
	set := s.siteSet(f)
	set["code"] = code
	if f.ok() {
		err := s.append(c, store.Draft{ID: record, Kind: "site.registered", Log: subject, Subject: subject, Body: map[string]any{"set": set}})
		if err == nil {
			return toPage(c, "/sites/"+code)
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.formBack(c, f, s.siteForm(c, nil))
}

func (s *Server) siteEdit(c echo.Context) error {
	site, err := s.siteOf(c)
	if err != nil {
		return err
	}
	f, err := s.editForm(siteValues(site), site.Conflicts)
	if err != nil {
		return err
	}
	return s.formBack(c, f, s.siteForm(c, &site))
}

func (s *Server) siteUpdate(c echo.Context) error {
	site, err := s.siteOf(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	record, set := f.id(recordField), s.siteSet(f)
	f.meanwhile(siteValues(site))
	if f.ok() {
		if len(set) > 0 {
			err = s.append(c, store.Draft{ID: record, Kind: "site.set", Log: site.ID, Subject: site.ID, Body: f.setBody(set)})
		}
		if err == nil {
			return toPage(c, siteHref(site))
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.formBack(c, f, s.siteForm(c, &site))
}

// siteValues are a site's fields as its form shows them.
func siteValues(site store.Site) map[string]string {
	return map[string]string{"name": site.Name, "zone": site.Zone, "address": site.Address, "standard": site.Standard}
}

// siteSet reads what a site form may change.
func (s *Server) siteSet(f *typedForm) map[string]any {
	set := map[string]any{}
	f.setText(set, "name", "name", f.needed("name", s.words.Say("office.site.name"), 120))
	zone := f.needed("zone", s.words.Say("office.site.zone"), 60)
	if _, err := time.LoadLocation(zone); zone != "" && (err != nil || zone == "Local") {
		f.refuse("zone", s.words.Say("office.form.zone"))
	}
	f.setText(set, "zone", "zone", zone)
	f.setText(set, "address", "address", f.line("address", 300))
	f.setText(set, "standard", "standard", f.choice("standard", "NEC", "IEC"))
	return set
}

// siteForm is the page of a new site, or of one that is there.
func (s *Server) siteForm(c echo.Context, site *store.Site) formPage {
	k := s.ink()
	fields := []field{
		{Name: "name", Label: k.say("office.site.name"), Required: true},
		{Name: "code", Label: k.say("office.site.code"), Hint: k.say("office.site.code_hint"), Required: true},
		{Name: "zone", Label: k.say("office.site.zone"), Hint: k.say("office.site.zone_hint"), Required: true, Known: zonesOffered},
		{Name: "standard", Label: k.say("office.site.standard"), Required: true, Options: choices("", "NEC", k.say("office.site.nec"), "IEC", k.say("office.site.iec"))},
		{Name: "address", Label: k.say("office.site.address"), Type: "text-area", Wide: true},
	}
	p := formPage{
		Frame: s.frame(c, k.say("office.site.new"), "sites"), Heading: k.say("office.site.new_head"), Lead: k.say("office.site.new_lead"),
		Action: "/sites", Submit: k.say("office.site.save_new"), Cancel: "/sites",
	}
	if site != nil {
		fields = append(fields[:1:1], fields[2:]...)
		p.Frame = s.frame(c, k.say("office.site.edit"), "sites")
		p.Heading, p.Lead, p.Submit = k.say("office.site.edit_head", "name", site.Name), "", k.say("office.site.save")
		p.Crumbs = []link{{Href: siteHref(*site), Text: site.Name}}
		p.Action, p.Cancel = siteHref(*site)+"/edit", siteHref(*site)
	}
	p.Groups = []fieldGroup{{Fields: fields}}
	return p
}

// siteOf reads the site an address names.
func (s *Server) siteOf(c echo.Context) (site store.Site, err error) {
	err = s.store.View(scope(c), func(v *store.View) (err error) {
		site, err = v.Site(c.Param("site"))
		return err
	})
	return site, err
}
