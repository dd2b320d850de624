package server

import (
	"strconv"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

func (s *Server) certificateAsk(c echo.Context) error { return s.todayAsk(c, s.certificateForm) }

func (s *Server) provedAsk(c echo.Context) error { return s.todayAsk(c, s.provedForm) }

// todayAsk asks what happened to an instrument, today unless another day is said.
func (s *Server) todayAsk(c echo.Context, page func(echo.Context, store.Instrument) formPage) error {
	i, err := s.instrumentOf(c)
	if err != nil {
		return err
	}
	f, err := s.blankForm(map[string]string{"on": forms.DayOf(s.store.Now()).String()})
	if err != nil {
		return err
	}
	return s.formBack(c, f, page(c, i))
}

// certificateTake keeps a certificate with its file. One found out of tolerance leads on to what it puts in doubt.
func (s *Server) certificateTake(c echo.Context) error {
	i, err := s.instrumentOf(c)
	if err != nil {
		return err
	}
	f, raw, err := s.typedUpload(c)
	if err != nil {
		return err
	}
	record := f.id(recordField)
	body := s.certificateBody(f)
	if raw != nil {
		if err := store.CheckFile(raw); err != nil {
			w, _ := wrongOf(err)
			f.refuse(fileField, w.Text)
		}
		body["file"], body["file_name"] = hashOf(raw), f.line("file_name", 120)
	}
	if f.ok() {
		err := s.append(c, store.Draft{ID: record, Kind: "instrument.calibrated", Log: "org", Subject: i.ID, Body: body})
		if err == nil && raw != nil {
			err = s.store.KeepFile(scope(c), record, raw)
		}
		if err == nil {
			if body["out"] == true {
				return toPage(c, "/instruments/"+i.ID+"/recall/"+record)
			}
			return toPage(c, "/instruments/"+i.ID+"/past")
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.formBack(c, f, s.certificateForm(c, i))
}

func (s *Server) certificateBody(f *typedForm) map[string]any {
	k := s.ink()
	on, due := f.date("on"), f.date("due")
	if on == forms.NoDay {
		f.refuse("on", k.say("office.form.day"))
	}
	if on > forms.DayOf(s.store.Now())+1 {
		f.refuse("on", k.say("office.form.future"))
	}
	body := map[string]any{"on": on.String(), "out": f.choice("out", "no", "yes") == "yes"}
	if due != forms.NoDay {
		body["due"] = due.String()
	}
	if number := f.line("certificate", 80); number != "" {
		body["certificate"] = number
	}
	found := map[string]any{}
	for _, code := range accuracyCodes {
		one := map[string]any{}
		if v := f.signedFigure("percent." + code); v != nil {
			one["percent"] = *v
		}
		if v := f.signedFigure("plus." + code); v != nil {
			one["plus"] = *v
		}
		if len(one) > 0 {
			found[code] = one
		}
	}
	if len(found) > 0 {
		body["errors"] = found
	} else if body["out"] == true {
		f.refuse("percent."+accuracyCodes[0], k.say("office.instrument.errors_needed"))
	}
	return body
}

// signedFigure reads a number that may be below 0.
func (f *typedForm) signedFigure(name string) *float64 {
	v := strings.TrimSpace(strings.ReplaceAll(f.Get(name), "−", "-"))
	if v == "" {
		return nil
	}
	n, err := strconv.ParseFloat(strings.Replace(strings.TrimPrefix(v, "+"), ",", ".", 1), 64)
	if err != nil || n > 1e6 || n < -1e6 || strings.HasPrefix(name, "percent.") && (n <= -90 || n > 1000) {
		f.refuse(name, f.ink.say("office.form.number"))
		return nil
	}
	return &n
}

func (s *Server) certificateForm(c echo.Context, i store.Instrument) formPage {
	k := s.ink()
	say := func(key string) string { return k.say("office.instrument." + key) }
	found := fieldGroup{Legend: say("group_found"), Note: say("found_note")}
	for _, code := range accuracyCodes {
		found.Fields = append(found.Fields,
			field{Name: "percent." + code, Label: k.say("office.instrument.percent", "name", k.reading(code)), Type: "number", Unit: "%"},
			field{Name: "plus." + code, Label: k.say("office.instrument.plus", "name", k.reading(code)), Type: "number", Unit: k.named("unit", unitOf(code))})
	}
	return formPage{
		Frame: s.frame(c, say("certificate_new"), "set-up"), Upload: true, Heading: k.say("office.instrument.certificate_head", "name", i.Name), Lead: say("certificate_lead"),
		Crumbs: []link{{Href: "/set-up", Text: k.say("office.setup.title")}, {Href: "/instruments/" + i.ID + "/past", Text: i.Name}},
		Action: "/instruments/" + i.ID + "/certificate", Submit: say("certificate_save"), Cancel: "/instruments/" + i.ID + "/past",
		Groups: []fieldGroup{
			{Fields: []field{
				{Name: "on", Label: say("calibrated_on"), Type: "date", Required: true}, {Name: "due", Label: say("calibration"), Type: "date"}, {Name: "certificate", Label: say("number")},
				{Name: "out", Label: say("outcome"), Required: true, Options: choices("", "no", say("in_tolerance"), "yes", say("out_of_tolerance"))},
				{Name: fileField, Label: say("file"), Type: "photo", Hint: say("file_hint"), Accept: "application/pdf,image/jpeg", Wide: true}, {Name: "file_name", Label: say("file_name")},
			}}, found,
		},
	}
}

// provedTake keeps that an instrument was tried on an outlet whose reading is known.
func (s *Server) provedTake(c echo.Context) error {
	i, err := s.instrumentOf(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	k := s.ink()
	record, on := f.id(recordField), f.date("on")
	if on == forms.NoDay {
		f.refuse("on", k.say("office.form.day"))
	}
	body := map[string]any{"on": on.String(), "works": f.choice("works", "yes", "no") == "yes", "where": f.needed("where", k.say("office.instrument.proved_where"), 120)}
	if f.ok() {
		err := s.append(c, store.Draft{ID: record, Kind: "instrument.proved", Log: "org", Subject: i.ID, Body: body})
		if err == nil {
			return toPage(c, "/instruments/"+i.ID+"/past")
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.formBack(c, f, s.provedForm(c, i))
}

func (s *Server) provedForm(c echo.Context, i store.Instrument) formPage {
	k := s.ink()
	say := func(key string) string { return k.say("office.instrument." + key) }
	return formPage{
		Frame: s.frame(c, say("proved_new"), "set-up"), Heading: k.say("office.instrument.proved_head", "name", i.Name), Lead: say("proved_lead"),
		Crumbs: []link{{Href: "/set-up", Text: k.say("office.setup.title")}, {Href: "/instruments/" + i.ID + "/past", Text: i.Name}},
		Action: "/instruments/" + i.ID + "/proved", Submit: say("proved_save"), Cancel: "/instruments/" + i.ID + "/past",
		Groups: []fieldGroup{{Fields: []field{
			{Name: "on", Label: say("proved_on"), Type: "date", Required: true}, {Name: "where", Label: say("proved_where"), Required: true},
			{Name: "works", Label: say("proved_outcome"), Required: true, Options: choices("", "yes", say("proved_works"), "no", say("proved_not"))},
		}}},
	}
}
