package server

import (
	"crypto/sha256"
	"encoding/hex"
	"slices"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// defectActs are what may be said of a defect: the record each makes, and the member its words go into.
var defectActs = map[string]struct{ kind, text string }{
	"safe": {"defect.made_safe", "how"}, "assign": {"defect.assigned", "crew"}, "repaired": {"defect.repaired", "how"},
	"note": {"defect.noted", "text"}, "close": {"defect.closed", "reason"}, "reopen": {"defect.reopened", "reason"},
}

func (s *Server) defectActAsk(c echo.Context) error {
	d, site, err := s.defectAt(c)
	if err != nil {
		return err
	}
	f, err := s.blankForm(map[string]string{"parts": strings.Join(d.Parts, "\n"), "due": d.Due.String()})
	if err != nil {
		return err
	}
	return s.actBack(c, f, d, site)
}

// defectAct keeps what a manager says of a defect.
func (s *Server) defectAct(c echo.Context) error {
	d, site, err := s.defectAt(c)
	if err != nil {
		return err
	}
	f, raw, err := s.typedUpload(c)
	if err != nil {
		return err
	}
	act := defectActs[c.Param("act")]
	record := f.id(recordField)
	body := s.actBody(f, c.Param("act"), d)
	photo := s.photoIn(f, raw, body)
	if f.ok() {
		err := s.append(c, store.Draft{ID: record, Kind: act.kind, Log: site.ID, Subject: d.ID, Body: body})
		if err == nil {
			if err := s.keepPhoto(c, record, photo); err != nil {
				return err
			}
			return toPage(c, "/defects/"+d.ID)
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.actBack(c, f, d, site)
}

func (s *Server) defectAt(c echo.Context) (d store.Defect, site store.Site, err error) {
	if _, known := defectActs[c.Param("act")]; !known {
		return d, site, refuse(codeNotFound, "", s.words.Say("office.defect.no_act"))
	}
	err = s.store.View(scope(c), func(v *store.View) error {
		if d, err = v.Defect(c.Param("defect"), forms.DayOf(s.store.Now())); err != nil {
			return err
		}
		site, err = v.Site(d.Site)
		return err
	})
	return d, site, err
}

// actBody reads what a form says; only what it asks for is there.
func (s *Server) actBody(f *typedForm, act string, d store.Defect) map[string]any {
	k := s.ink()
	body := map[string]any{"device": d.Device.ID}
	put := func(name, value string) {
		if value != "" {
			body[name] = value
		}
	}
	text := defectActs[act].text
	switch act {
	case "assign":
		put("to", f.Get("to"))
		put("crew", f.line("crew", 120))
		if f.Get("to") == "" && body["crew"] == nil {
			f.refuse("to", k.say("office.defect.assign_whom"))
		}
	case "note":
		put(text, f.line("text", 2000))
		if severity := f.Get("severity"); severity != "" {
			put("severity", f.choice("severity", forms.DefectSeverities()...))
		}
	default:
		put(text, f.needed("text", k.say("office.defect.ask."+act), 500))
	}
	if act == "assign" || act == "note" {
		put("due", f.date("due").String())
	}
	if f.Has("parts") {
		if parts := partsOf(f.Get("parts")); !slices.Equal(parts, d.Parts) {
			body["parts"] = parts
		}
	}
	if act == "note" && len(body) == 1 && f.ok() {
		f.refuse("text", k.say("office.form.need", "name", k.say("office.defect.ask.note")))
	}
	return body
}

// partsOf reads one part a line.
func partsOf(text string) []string {
	out := []string{}
	for line := range strings.Lines(text) {
		if line = strings.TrimSpace(line); line != "" && len(out) < 50 {
			out = append(out, string([]rune(line)[:min(len([]rune(line)), 120)]))
		}
	}
	return out
}

// photoIn draws a chosen picture anew and names it in the body.
func (s *Server) photoIn(f *typedForm, raw []byte, body map[string]any) []byte {
	if raw == nil || !f.ok() {
		return nil
	}
	photo, err := s.drawnAnew(raw)
	if err != nil {
		w, _ := wrongOf(err)
		f.refuse(fileField, w.Text)
		return nil
	}
	body["photos"] = []string{hashOf(photo)}
	return photo
}

func hashOf(raw []byte) string {
	sum := sha256.Sum256(raw)
	return hex.EncodeToString(sum[:])
}

// keepPhoto lays a picture beside the book once its record is in it.
func (s *Server) keepPhoto(c echo.Context, record string, photo []byte) error {
	if photo == nil {
		return nil
	}
	return s.store.KeepPhoto(scope(c), record, hashOf(photo), photo)
}

func (s *Server) actBack(c echo.Context, f *typedForm, d store.Defect, site store.Site) error {
	k, act := s.ink(), c.Param("act")
	p := formPage{
		Frame: s.frame(c, k.say("office.defect.act."+act), "defects"), Upload: true,
		Crumbs:  []link{{Href: "/defects", Text: k.say("office.defect.title")}, {Href: "/defects/" + d.ID, Text: joined(s.causeName(&d), s.spot(d.Device))}},
		Heading: k.say("office.defect.act_head."+act, "spot", s.spot(d.Device)), Lead: k.say("office.defect.act_lead." + act),
		Action: "/defects/" + d.ID + "/" + act, Submit: k.say("office.defect.act." + act), Cancel: "/defects/" + d.ID,
	}
	if act == "safe" {
		err := s.store.View(scope(c), func(v *store.View) error {
			feeds, err := s.alsoFeeds(v, d.Device, site)
			p.Lead += " " + feeds
			return err
		})
		if err != nil {
			return err
		}
	}
	people, err := s.store.People()
	if err != nil {
		return err
	}
	p.Groups = []fieldGroup{{Fields: s.actFields(act, people, site)}}
	return s.formBack(c, f, p)
}

func (s *Server) actFields(act string, people []store.Person, site store.Site) []field {
	k := s.ink()
	ask := func(name string) string { return k.say("office.defect.ask." + name) }
	parts := field{Name: "parts", Label: ask("parts"), Hint: k.say("office.defect.parts_hint"), Type: "text-area", Wide: true}
	due := field{Name: "due", Label: ask("due"), Type: "date"}
	photo := field{Name: fileField, Label: ask("photo"), Type: "photo", Hint: k.say("office.defect.photo_hint"), Wide: true}
	text := field{Name: "text", Label: ask(act), Required: act != "note", Wide: true}
	if act == "safe" || act == "repaired" {
		text.Hint = k.say("office.defect.hint." + act)
	}
	switch act {
	case "assign":
		return []field{{Name: "to", Label: ask("to"), Options: optional(k.say("office.defect.nobody"), whoMayRepair(people, site)...)}, {Name: "crew", Label: ask("crew")}, due, parts}
	case "note":
		text.Type = "text-area"
		var severities []string
		for _, severity := range forms.DefectSeverities() {
			severities = append(severities, severity, k.named("office.defect.severity_long", severity))
		}
		return []field{text, {Name: "severity", Label: ask("severity"), Options: optional(k.say("office.defect.as_it_is"), severities...)}, due, parts, photo}
	case "close", "reopen":
		return []field{text}
	case "repaired":
		return []field{text, parts, photo}
	}
	return []field{text, photo}
}

// whoMayRepair are the people of a site, by name.
func whoMayRepair(people []store.Person, site store.Site) []string {
	var pairs []string
	for _, p := range people {
		if p.Active && p.Role != "auditor" && (p.All || slices.Contains(p.Sites, site.ID)) {
			pairs = append(pairs, p.ID, p.Name)
		}
	}
	return pairs
}
