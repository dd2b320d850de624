package server

import (
	"bytes"
	"embed"
	"fmt"
	"html/template"
	"io/fs"
	"path"
	"strings"

	"tripwell/static"
)

// Pages lie here and not under static, so that a template can never be downloaded.
//
//go:embed pages/*.html
var pageFiles embed.FS

// pages holds every page's template, each with the layout and the part_*.html files.
type pages struct{ byName map[string]*template.Template }

// newPages parses all pages once. asset gives the address of a file of static by its name.
func newPages(words *static.Words, asset func(name string) string) (*pages, error) {
	funcs := template.FuncMap{"asset": asset, "say": words.Say}
	base, err := template.New("layout").Funcs(funcs).ParseFS(pageFiles, "pages/layout.html", "pages/part_*.html")
	if err != nil {
		return nil, fmt.Errorf("pages: %w", err)
	}
	names, err := fs.Glob(pageFiles, "pages/*.html")
	if err != nil {
		return nil, fmt.Errorf("pages: %w", err)
	}
	p := &pages{byName: map[string]*template.Template{}}
	for _, file := range names {
		name := strings.TrimSuffix(path.Base(file), ".html")
		if name == "layout" || strings.HasPrefix(name, "part_") {
			continue
		}
		t, err := base.Clone()
		if err != nil {
			return nil, fmt.Errorf("page %s: %w", name, err)
		}
		if p.byName[name], err = t.ParseFS(pageFiles, file); err != nil {
			return nil, fmt.Errorf("page %s: %w", name, err)
		}
	}
	return p, nil
}

// render gives the whole page as bytes, so that nothing of it is sent when a part of it fails. data is the page's
// struct, which embeds onPage.
func (p *pages) render(name string, data any) ([]byte, error) {
	t, ok := p.byName[name]
	if !ok {
		return nil, fmt.Errorf("page %s: no such template", name)
	}
	var b bytes.Buffer
	if err := t.ExecuteTemplate(&b, "layout", data); err != nil {
		return nil, fmt.Errorf("page %s: %w", name, err)
	}
	return b.Bytes(), nil
}

// onPage is embedded in every page's struct: what the layout shows around the page itself.
type onPage struct{ Mast mast }

// mast is the head of a page. Title is the window's; Who is empty for somebody who has not signed in.
type mast struct {
	Title, Who, Today string
	Demo              bool
	Nav               []link
}

// link is a link with its text; Here marks the one that leads to the present page, or the main one of several.
type link struct {
	Href, Text string
	Here       bool
}
