package server

import (
	"cmp"
	"maps"
	"slices"
	"strconv"
	"strings"
	"time"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// Fields of a device form by whose record they belong to. The names are those of the register.
var (
	placeTexts    = []string{"building", "floor", "room", "name", "critical_load", "whom_to_tell", "test_from", "test_until"}
	deviceTexts   = []string{"make", "model", "serial", "note"}
	deviceFigures = []string{"rating_a", "nominal_v", "rated_residual_ma"}
)

func (s *Server) deviceNew(c echo.Context) error {
	site, err := s.siteOf(c)
	if err != nil {
		return err
	}
	values := map[string]string{"kind": forms.GFCIReceptacle}
	if id := c.QueryParam("after"); id != "" {
		before, _, err := s.deviceAt(c, id)
		if err != nil {
			return err
		}
		values = s.successor(before)
	}
	f, err := s.blankForm(values)
	if err != nil {
		return err
	}
	return s.formBack(c, f, s.deviceForm(c, site, nil, f))
}

// successor is what a new device has in common with the one it replaces: place, kind and circuit.
func (s *Server) successor(before store.Device) map[string]string {
	all := s.deviceValues(before, store.Circuit{})
	out := map[string]string{"place": before.Place.ID}
	for _, name := range []string{"kind", "building", "floor", "room", "name", "order", "critical_load", "whom_to_tell", "test_from", "test_until", "panel", "circuit", "rating_a", "rated_residual_ma", "nominal_v", "equipment_ground", "faces", "fed_by", "usual"} {
		out[name] = all[name]
	}
	return out
}

func (s *Server) deviceCreate(c echo.Context) error {
	site, err := s.siteOf(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	subject := f.id(subjectField)
	in := s.deviceInput(f)
	s.itemInput(f, &in, nil)
	tag := s.tagInput(f)
	if f.ok() {
		drafts, err := s.newDeviceDrafts(c, site, f, in, tag)
		if err == nil {
			err = s.append(c, drafts...)
		}
		if err == nil {
			return toPage(c, "/devices/"+subject)
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.formBack(c, f, s.deviceForm(c, site, nil, f))
}

// deviceInput is what a device form said, by record.
type deviceInput struct {
	place, device   map[string]any
	circuit, supply map[string]any // of the circuit: what was changed, and all that stands in the form
	panel, numbers  string
	moved           bool // panel or circuit was changed
}

// deviceInput reads what a device form may change.
func (s *Server) deviceInput(f *typedForm) deviceInput {
	k := s.ink()
	in := deviceInput{place: map[string]any{}, device: map[string]any{}, circuit: map[string]any{}, supply: map[string]any{}}
	if !forms.IsPortable(f.Get("kind")) {
		f.needed("name", k.say("office.device.spot"), 120)
	}
	for _, name := range placeTexts {
		f.setText(in.place, name, name, f.line(name, 200))
	}
	f.window()
	f.setFigure(in.place, "order", "order", f.figure("order"))
	f.setText(in.device, "kind", "kind", f.choice("kind", forms.Kinds()...))
	for _, name := range deviceTexts {
		f.setText(in.device, name, name, f.line(name, 500))
	}
	for _, name := range deviceFigures {
		f.setFigure(in.device, name, name, f.figure(name))
	}
	installed := f.date("installed")
	f.setText(in.device, "installed", "installed", installed.String())
	f.setText(in.place, "usual", "usual", f.line("usual", 60))
	faces := f.choice("faces", "", "1", "2")
	if f.changed("faces") {
		if in.device["faces"] = nil; faces != "" {
			in.device["faces"] = float64(faces[0] - '0')
		}
	}
	f.setText(in.device, "fed_by", "fed_by", f.line("fed_by", 36))
	f.setText(in.device, "equipment_ground", "equipment_ground", f.choice("equipment_ground", "", "yes", "none-permitted"))
	traitInput(f, in.device)
	if f.changed("delayed") {
		in.device["delayed"] = f.Get("delayed") == "yes"
	}
	in.panel, in.numbers = f.line("panel", 40), f.line("circuit", 40)
	in.moved = f.changed("panel") || f.changed("circuit")
	if (in.panel == "") != (in.numbers == "") {
		f.refuse("circuit", k.say("office.device.circuit_unset"))
	}
	breaker, supply := f.figure("breaker_a"), f.choice("supply", "", "grounded", "isolated")
	f.setFigure(in.circuit, "breaker_a", "breaker_a", breaker)
	f.setText(in.circuit, "supply", "supply", supply)
	if breaker != nil {
		in.supply["breaker_a"] = *breaker
	}
	if supply != "" {
		in.supply["supply"] = supply
	}
	if len(in.supply) > 0 && in.numbers == "" {
		f.refuse("circuit", k.say("office.device.circuit_unset"))
	}
	return in
}

// window holds the times between which TEST may be pressed at a place: both or none.
func (f *typedForm) window() {
	from, until := f.clock("test_from"), f.clock("test_until")
	if (from == "") != (until == "") && f.ok() {
		f.refuse("test_until", f.ink.say("office.device.window_both"))
	}
}

// clock reads a time of day as 15:04; "" where nothing was typed.
func (f *typedForm) clock(name string) string {
	v := strings.TrimSpace(f.Get(name))
	if v == "" {
		return ""
	}
	t, err := time.Parse("15:04", v)
	if err != nil {
		f.refuse(name, f.ink.say("office.device.window_time"))
		return ""
	}
	return t.Format("15:04")
}

// tagInput reads the tag of a new device's label: one that is there, or "new" for one to be drawn.
func (s *Server) tagInput(f *typedForm) string {
	typed := strings.ReplaceAll(f.line("tag", 40), hyphen, "-")
	if f.Get("mint") == "yes" {
		if typed != "" {
			f.refuse("tag", s.words.Say("office.device.tag_both"))
		}
		return "new"
	}
	if typed == "" {
		return ""
	}
	tag, ok := record.ParseTag(typed)
	if !ok {
		f.refuse("tag", s.words.Say("office.form.tag"))
	}
	return tag
}

func (s *Server) newDeviceDrafts(c echo.Context, site store.Site, f *typedForm, in deviceInput, tag string) ([]store.Draft, error) {
	first, subject := f.Get(recordField), f.Get(subjectField)
	place, placeKind, labelled := f.Get("place"), "place.set", ""
	if portable := forms.IsPortable(f.Get("kind")); portable && place == "" {
		labelled = subject
	} else if place == "" {
		place, placeKind = record.NamedID(subject, "place"), "place.registered"
	} else if err := s.placeHere(c, site, place); err != nil {
		return nil, err
	}
	drafts, circuit, err := s.circuitDrafts(c, site, first, in)
	if err != nil {
		return nil, err
	}
	if labelled == "" {
		in.device["place"], labelled = place, place
	}
	if circuit != "" {
		in.device["circuit"] = circuit
	}
	if len(in.place) > 0 {
		drafts = append(drafts, store.Draft{ID: record.NamedID(first, "place"), Kind: placeKind, Log: site.ID, Subject: place, Body: f.setBody(in.place)})
	}
	drafts = append(drafts, store.Draft{ID: first, Kind: "device.registered", Log: site.ID, Subject: subject, Body: f.setBody(in.device)})
	if tag == "new" {
		if tag, err = s.drawTag(c, first); err != nil {
			return nil, err
		}
	}
	if tag != "" {
		drafts = append(drafts, store.Draft{ID: record.NamedID(first, "tag"), Kind: "tag.bound", Log: site.ID, Subject: labelled, Body: map[string]any{"tag": tag}})
	}
	return drafts, nil
}

// drawTag mints a tag for a form; a form that comes twice draws none the second time.
func (s *Server) drawTag(c echo.Context, first string) (string, error) {
	receipts, err := s.store.Ask(scope(c), []string{first})
	if err != nil || len(receipts) > 0 {
		return "", err
	}
	tags, err := s.store.MintTags(c.Request().Context(), person(c).ID, 1)
	if err != nil {
		return "", err
	}
	return tags[0], nil
}

// placeHere refuses a place of another site.
func (s *Server) placeHere(c echo.Context, site store.Site, place string) error {
	return s.store.View(scope(c), func(v *store.View) error {
		places, err := v.Places(site.ID)
		if err == nil && !slices.ContainsFunc(places, func(p store.Place) bool { return p.ID == place }) {
			return refuse(codeInvalid, "", s.words.Say("office.form.broken"))
		}
		return err
	})
}

// circuitDrafts finds the circuit a form names, or makes it and its panel. What the form says of the breaker and the
// supply is set on it: all of it on a new circuit, else what was changed.
func (s *Server) circuitDrafts(c echo.Context, site store.Site, first string, in deviceInput) (drafts []store.Draft, circuit string, err error) {
	if in.numbers == "" {
		return nil, "", nil
	}
	known, panel, err := s.circuitNamed(c, site, in.panel, in.numbers)
	if err != nil {
		return nil, "", err
	}
	circuit, set := known, in.circuit
	if circuit == "" {
		set = maps.Clone(in.supply)
		if panel == "" {
			panel = record.NamedID(site.ID, "panel", strings.ToUpper(in.panel))
			drafts = append(drafts, store.Draft{ID: record.NamedID(first, "panel"), Kind: "panel.set", Log: site.ID, Subject: panel, Body: map[string]any{"set": map[string]any{"name": in.panel}}})
		}
		circuit = record.NamedID(site.ID, "circuit", panel, strings.ToUpper(in.numbers))
		set["panel"], set["numbers"] = panel, in.numbers
	}
	if len(set) > 0 {
		drafts = append(drafts, store.Draft{ID: record.NamedID(first, "circuit"), Kind: "circuit.set", Log: site.ID, Subject: circuit, Body: map[string]any{"set": set}})
	}
	return drafts, circuit, nil
}

// circuitNamed finds a circuit and its panel by their names; empty where the register has none.
func (s *Server) circuitNamed(c echo.Context, site store.Site, panelName, numbers string) (circuit, panel string, err error) {
	err = s.store.View(scope(c), func(v *store.View) error {
		circuits, err := v.Circuits(site.ID)
		if err != nil {
			return err
		}
		for _, one := range circuits {
			if strings.EqualFold(one.Panel, panelName) && strings.EqualFold(one.Numbers, numbers) {
				circuit, panel = one.ID, one.PanelID
				return nil
			}
		}
		panels, err := v.Panels(site.ID)
		for _, one := range panels {
			if strings.EqualFold(one.Name, panelName) {
				panel = one.ID
			}
		}
		return err
	})
	return circuit, panel, err
}

func (s *Server) deviceEdit(c echo.Context) error {
	d, site, err := s.deviceAt(c, c.Param("device"))
	if err != nil {
		return err
	}
	fed, err := s.circuitOf(c, d)
	if err != nil {
		return err
	}
	f, err := s.editForm(s.deviceValues(d, fed), d.Conflicts)
	if err != nil {
		return err
	}
	return s.formBack(c, f, s.deviceForm(c, site, &d, f))
}

func (s *Server) deviceUpdate(c echo.Context) error {
	d, site, err := s.deviceAt(c, c.Param("device"))
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	first := f.id(recordField)
	if err := s.sourceTyped(c, d, f); err != nil {
		return err
	}
	in := s.deviceInput(f)
	s.itemInput(f, &in, &d)
	s.atSiteInput(c, f, &in, site, &d)
	fed, err := s.circuitOf(c, d)
	if err != nil {
		return err
	}
	f.meanwhile(s.deviceValues(d, fed))
	if err := s.sourceInput(c, d, f); err != nil {
		return err
	}
	if f.ok() {
		drafts, err := s.changedDeviceDrafts(c, site, d, f, in, first)
		if err == nil && len(drafts) > 0 {
			err = s.append(c, drafts...)
		}
		if err == nil {
			return toPage(c, "/devices/"+d.ID)
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.formBack(c, f, s.deviceForm(c, site, &d, f))
}

func (s *Server) changedDeviceDrafts(c echo.Context, site store.Site, d store.Device, f *typedForm, in deviceInput, first string) ([]store.Draft, error) {
	drafts, circuit, err := s.circuitDrafts(c, site, first, in)
	if err != nil {
		return nil, err
	}
	if in.moved {
		if in.device["circuit"] = nil; circuit != "" {
			in.device["circuit"] = circuit
		}
	}
	for _, lost := range d.Conflicts { // what this form has no field for is settled as it stands
		if lost.Subject == d.ID && !f.Has(lost.Field) && slices.Contains(f.Values[settleField], lost.Field) {
			in.device[lost.Field] = d.Fields[lost.Field]
		}
	}
	if d.Place.ID == "" && len(in.place) > 0 {
		place := record.NamedID(first, "place-of")
		in.device["place"] = place
		drafts = append(drafts, store.Draft{ID: record.NamedID(first, "place"), Kind: "place.registered", Log: site.ID, Subject: place, Body: f.setBody(in.place)})
	} else if len(in.place) > 0 {
		drafts = append(drafts, store.Draft{ID: record.NamedID(first, "place"), Kind: "place.set", Log: site.ID, Subject: d.Place.ID, Body: f.setBody(in.place)})
	}
	if len(in.device) > 0 {
		drafts = append(drafts, store.Draft{ID: first, Kind: "device.set", Log: site.ID, Subject: d.ID, Body: f.setBody(in.device)})
	}
	return drafts, nil
}

// deviceValues are a device's fields as its form shows them.
func (s *Server) deviceValues(d store.Device, fed store.Circuit) map[string]string {
	text := func(name string) string { v, _ := d.Fields[name].(string); return v }
	out := map[string]string{
		"building": d.Place.Building, "floor": d.Place.Floor, "room": d.Place.Room, "name": cmp.Or(d.Place.Name, text("where")), "critical_load": d.Place.CriticalLoad, "whom_to_tell": d.Place.WhomToTell,
		"test_from": d.Place.TestFrom, "test_until": d.Place.TestUntil,
		"panel": d.Panel, "circuit": d.Circuit, "kind": d.Kind, "equipment_ground": text("equipment_ground"), "fed_by": text("fed_by"), "usual": d.Place.Usual, "at_site": d.AtSite, "faces": "", "installed": text("installed"), "delayed": "", "order": "",
	}
	if d.Place.Order != 0 {
		out["order"] = plainFigure(d.Place.Order)
	}
	for _, name := range deviceTexts {
		out[name] = text(name)
	}
	for _, name := range deviceFigures {
		if v, ok := d.Fields[name].(float64); ok {
			out[name] = plainFigure(v)
		} else {
			out[name] = ""
		}
	}
	if v, ok := d.Fields["faces"].(float64); ok {
		out["faces"] = plainFigure(v)
	}
	if v, _ := d.Fields["delayed"].(bool); v {
		out["delayed"] = "yes"
	}
	traitValues(d.Fields, out)
	out["supply"], _ = fed.Fields["supply"].(string)
	if out["breaker_a"] = ""; fed.Fields["breaker_a"] != nil {
		if v, ok := fed.Fields["breaker_a"].(float64); ok {
			out["breaker_a"] = plainFigure(v)
		}
	}
	return out
}

// circuitOf gives the circuit that feeds a device; one without any is fed by the empty one.
func (s *Server) circuitOf(c echo.Context, d store.Device) (fed store.Circuit, err error) {
	err = s.store.View(scope(c), func(v *store.View) error {
		circuits, err := v.Circuits(d.Site)
		for _, one := range circuits {
			if one.ID == d.Fields["circuit"] {
				fed = one
			}
		}
		return err
	})
	return fed, err
}

// plainFigure writes a figure the way it is typed.
func plainFigure(v float64) string { return strconv.FormatFloat(v, 'f', -1, 64) }

// deviceAt reads a device within the caller's scope, with its site.
func (s *Server) deviceAt(c echo.Context, id string) (d store.Device, site store.Site, err error) {
	err = s.store.View(scope(c), func(v *store.View) (err error) {
		if d, err = v.Device(id, forms.DayOf(s.store.Now())); err != nil {
			return err
		}
		site, err = v.Site(d.Site)
		return err
	})
	return d, site, err
}
