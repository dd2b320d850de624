package server

import (
	"encoding/json"
	"strconv"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/export/register"
)

// importMend takes what a person mended. The import itself runs only on what the page showed: where anything was
// changed since, the page comes again first.
func (s *Server) importMend(c echo.Context) error {
	u, err := s.uploadFor(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	if name, use := f.Get("keep_as"), f.Get("use"); f.Get("do") == "keep" || use != "" {
		return s.importKept(c, u, name, use)
	}
	if u.done != nil {
		return toPage(c, "/import/"+u.id)
	}
	before := u
	u.mapping, u.newTags = mappingTyped(f, u.mapping), f.Get("new_tags") == "yes"
	if err := u.mapping.Check(); err != nil {
		w, fault := wrongOf(err)
		if fault {
			return err
		}
		before.note = w.Text
		s.imports.change(before)
		return toPage(c, "/import/"+u.id)
	}
	if f.Get("do") == "import" && sameMapping(before.mapping, u.mapping) {
		return s.importDo(c, u)
	}
	if f.Get("do") == "import" {
		u.note = s.words.Say("intake.look_again")
	}
	s.imports.change(u)
	return toPage(c, "/import/"+u.id)
}

// importKept keeps the columns as the page showed them, or reads the file by what was kept of another.
func (s *Server) importKept(c echo.Context, u upload, name, use string) (err error) {
	switch {
	case use != "" && u.done == nil:
		err = s.registerUse(&u, use)
	case u.done != nil:
		u.keptAs = name
		u.note, err = s.keepColumns(c, ofRegister, name, u.done.Shapes(), u.done.Mapping)
	case use == "":
		p, wrong := s.prepared(c, u)
		if wrong != nil {
			return wrong
		}
		u.keptAs = name
		u.note, err = s.keepColumns(c, ofRegister, name, p.Report.Shapes(), p.Report.Mapping)
	}
	if err != nil {
		return err
	}
	s.imports.change(u)
	return toPage(c, "/import/"+u.id)
}

// sameMapping compares as kept: an empty list is no list.
func sameMapping(a, b register.Mapping) bool {
	x, errX := json.Marshal(a)
	y, errY := json.Marshal(b)
	return errX == nil && errY == nil && string(x) == string(y)
}

// mappingTyped reads the mapping out of the preview's form; what the form does not ask stays.
func mappingTyped(f *typedForm, m register.Mapping) register.Mapping {
	out := register.Mapping{Dates: m.Dates, Zone: m.Zone, Standard: m.Standard, Site: m.Site, Kind: m.Kind}
	for name, into := range map[string]*string{"dates": (*string)(&out.Dates), "zone": &out.Zone, "kind": &out.Kind, "standard": &out.Standard} {
		if f.Has(name) {
			*into = strings.TrimSpace(f.Get(name))
		}
	}
	out.Columns, out.Kinds = mapCopy(m.Columns), mapCopy(m.Kinds)
	for n := range columnsOnPage {
		// Only what was changed is kept: what the file says by itself needs no word.
		if key, is, was := f.Get("ck."+strconv.Itoa(n)), f.Get("c."+strconv.Itoa(n)), f.Get("cw."+strconv.Itoa(n)); key != "" && is != was {
			out.Columns[key] = is
		}
	}
	for n := range kindsOnPage {
		word, kind := f.Get("kw."+strconv.Itoa(n)), f.Get("k."+strconv.Itoa(n))
		if delete(out.Kinds, word); word != "" && kind != "" {
			out.Kinds[word] = kind
		}
	}
	for n := range sheetsOnPage {
		i := "." + strconv.Itoa(n)
		if !f.Has("sheet" + i) {
			break
		}
		one := register.SheetMapping{Name: f.Get("sheet" + i), Skip: f.Get("skip"+i) == "yes", Site: strings.ToUpper(strings.TrimSpace(f.Get("site" + i)))}
		if f.Get("site"+i) == f.Get("sitewas"+i) {
			one.Site = f.Get("sitesaid" + i)
		}
		one.Header, _ = strconv.Atoi(strings.TrimSpace(f.Get("header" + i)))
		if f.Get("header"+i) == f.Get("headerwas"+i) {
			one.Header, _ = strconv.Atoi(f.Get("headersaid" + i))
		}
		one.Header = max(0, min(one.Header, 1<<20))
		if one.Skip || one.Site != "" || one.Header > 0 {
			out.Sheets = append(out.Sheets, one)
		}
	}
	return out
}

func mapCopy(m map[string]string) map[string]string {
	out := make(map[string]string, len(m))
	for k, v := range m {
		out[k] = v
	}
	return out
}
