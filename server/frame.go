package server

import (
	"embed"
	"fmt"
	"html/template"
	"io/fs"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

//go:embed pages/*.html
var pageFiles embed.FS

// Frame is what the layout shows around every page. A page's struct embeds it; everything in it is ready to print.
type Frame struct {
	Title   string // of the browser's tab
	Here    string // which entry of the masthead is this one: overview, sites, dates, or "" for none
	Name    string // of the person signed in; "" = nobody
	Who     string // their name and role, as one line
	Role    string // manager | crew | auditor
	Only    string // what a read-only person may see, said on every page; "" for everybody else
	Today   string // of the server, with its weekday; sites have their own
	Demo    bool   // invented data, said on every page
	Refresh int    // seconds after which the page reads itself again; 0 = never
	// Insecure is "" where the browser came by a way it keeps work on; else the address to go to instead, "?" where none is known.
	Insecure string
	Change   bool // the reader may change things: show what leads to forms
}

// frame fills the Frame of the request's caller.
func (s *Server) frame(c echo.Context, title, here string) Frame {
	p := person(c)
	f := Frame{Who: s.whoWords(p), Title: title, Here: here, Name: p.Name, Role: p.Role, Only: s.accessWords(p), Today: s.ink().longDay(forms.DayOf(s.store.Now())), Demo: s.store.Demo(), Change: p.Role == "manager"}
	if insecure(c.Request()) {
		f.Insecure = s.secureElsewhere()
	}
	return f
}

// whoWords names a person with their role, once where they are called by it.
func (s *Server) whoWords(p store.Person) string {
	role := s.words.Say("office.role." + p.Role)
	switch {
	case p.Name == "":
		return ""
	case strings.HasPrefix(strings.ToLower(p.Name), strings.ToLower(role)):
		return p.Name
	}
	return p.Name + ", " + role
}

// readPages parses server/pages once. layout.html and files whose names begin with _ are parts of every page; every other
// file is a page that defines "main", and is shown through "layout". A file that itself defines "page" (the field client's
// shell) stands alone.
func (s *Server) readPages() (map[string]*template.Template, error) {
	names, err := fs.Glob(pageFiles, "pages/*.html")
	if err != nil {
		return nil, err
	}
	base := template.New("").Funcs(s.pageFuncs())
	var pages []string
	for _, name := range names {
		short := strings.TrimPrefix(name, "pages/")
		if short != "layout.html" && !strings.HasPrefix(short, "_") {
			pages = append(pages, name)
			continue
		}
		if _, err := base.ParseFS(pageFiles, name); err != nil {
			return nil, fmt.Errorf("pages: %w", err)
		}
	}
	out := map[string]*template.Template{}
	for _, name := range pages {
		t, err := base.Clone()
		if err != nil {
			return nil, fmt.Errorf("pages: %w", err)
		}
		if t, err = t.ParseFS(pageFiles, name); err != nil {
			return nil, fmt.Errorf("pages: %w", err)
		}
		entry := "layout"
		if t.Lookup("page") != nil {
			entry = "page"
		}
		out[strings.TrimPrefix(name, "pages/")] = t.Lookup(entry)
	}
	return out, nil
}

// pageFuncs are the only functions a page may call: the address of an asset, the folder of all assets, and a sentence
// of the words catalogue by its key, with pairs of name and value.
func (s *Server) pageFuncs() template.FuncMap {
	return template.FuncMap{
		"asset":  s.assets.path,
		"assets": s.assets.root,
		"say":    s.words.Say,
	}
}
