// Package digest makes the message that tells a person what stands and what comes: what failed and is still in use first, then what is
// overdue, what is due within the week, and certificates that end. It has the same sentences as text and as HTML.
//
// It makes values from what is read within a store.View; it sends nothing and opens no files.
package digest

import (
	"bytes"
	"fmt"
	"html/template"
	"net/url"
	"strconv"
	"strings"
	"time"

	"tripwell/export"
	"tripwell/forms"
	"tripwell/static"
	"tripwell/store"
)

// Soon is how many days ahead due tests are told; certificates are told for a month.
const (
	Soon         = 7
	certificates = 31
	most         = 20 // lines of one list; the rest is behind its link
)

// Digest is one message.
type Digest struct {
	Subject    string
	Text, HTML string
}

// section is a heading with its lines.
type section struct {
	Head  string
	Lines []line
	More  string
	Href  string
}

type line struct{ Text, Under, Href string }

// Of makes the digest of a view's scope as things stand now. base is the address of the office, "" for no links.
func Of(v *store.View, now time.Time, base string, demo bool) (Digest, error) {
	words, err := static.ReadWords("en")
	if err != nil {
		return Digest{}, err
	}
	r := reader{v, words, strings.TrimSuffix(base, "/"), now}
	sites, err := v.Sites()
	if err != nil {
		return Digest{}, err
	}
	inUse, failed, err := r.inUse(sites)
	if err != nil {
		return Digest{}, err
	}
	overdue, soon, late, coming, err := r.dates(sites)
	if err != nil {
		return Digest{}, err
	}
	ends, err := r.certificates()
	if err != nil {
		return Digest{}, err
	}
	waiting, err := r.rounds()
	if err != nil {
		return Digest{}, err
	}
	var all []section
	for _, s := range []section{inUse, overdue, soon, ends, waiting} {
		if len(s.Lines) > 0 {
			all = append(all, s)
		}
	}
	var said []string
	if failed > 0 {
		said = append(said, words.Say("digest.failed", "n", failed))
	}
	if late > 0 {
		said = append(said, words.Say("digest.overdue", "n", late))
	}
	if len(said) == 0 {
		said = append(said, words.Say("digest.calm"))
	}
	if coming > 0 {
		said = append(said, words.Say("digest.due", "n", coming))
	}
	m := message{Subject: strings.Join(said, " "), Sections: all, Base: r.base, Foot: words.Say("digest.foot"), Settings: words.Say("digest.settings")}
	if m.Base != "" {
		m.SettingsHref = m.Base + "/reminders"
	}
	if demo {
		m.Demo = words.Say("office.demo.mark") + ": " + words.Say("office.demo.text")
	}
	return m.write()
}

type reader struct {
	v     *store.View
	words *static.Words
	base  string
	now   time.Time
}

func (r reader) link(path string) string {
	if r.base == "" {
		return ""
	}
	return r.base + path
}

// inUse lists what failed unsafely and is neither made safe nor put right, the oldest first, with its hours.
func (r reader) inUse(sites []store.Site) (section, int, error) {
	s := section{Head: r.words.Say("digest.in_use"), Href: r.link("/defects?state=in-use")}
	n := 0
	for _, site := range sites {
		list, err := r.v.Defects(store.DefectAsk{Site: site.ID, State: store.DefectsInUse, On: forms.DayOf(r.now.In(site.Location()))})
		if err != nil {
			return s, 0, err
		}
		for _, d := range list {
			if n++; n > most {
				continue
			}
			hours := int(r.now.Sub(d.OpenedAt()).Hours())
			spot := d.Device.Place.Name
			if spot == "" {
				spot = strings.TrimSpace(d.Device.Make + " " + d.Device.Model)
			}
			s.Lines = append(s.Lines, line{Text: export.Printable(joined(spot, export.TagText(d.Device.Tag))) + ": " + r.words.Say("digest.hours", "n", hours), Under: export.Printable(joined(site.Name, d.Device.Place.Context())), Href: r.link("/devices/" + d.Device.ID)})
		}
	}
	if n > most {
		s.More = r.words.Say("digest.more", "n", n-most)
	}
	return s, n, nil
}

func joined(parts ...string) string {
	var there []string
	for _, p := range parts {
		if p != "" {
			there = append(there, p)
		}
	}
	return strings.Join(there, " · ")
}

// dates counts by site and test what is overdue and what has its date within the week.
func (r reader) dates(sites []store.Site) (overdue, soon section, late, coming int, err error) {
	overdue = section{Head: r.words.Say("digest.overdue_head"), Href: r.link("/dates?within=late")}
	soon = section{Head: r.words.Say("digest.due_head"), Href: r.link("/dates")}
	for _, site := range sites {
		today := forms.DayOf(r.now.In(site.Location()))
		counts, err := r.v.DueCounts(site.ID, today, today+Soon)
		if err != nil {
			return overdue, soon, 0, 0, err
		}
		for _, task := range forms.Tasks() {
			n, next, since := 0, 0, forms.NoDay
			for _, c := range counts {
				switch {
				case c.Task != task || c.State == forms.Paused:
				case c.State == forms.Overdue:
					if n += c.N; since == forms.NoDay || c.Day < since {
						since = c.Day
					}
				case c.Day >= today:
					next += c.N
				}
			}
			name, q := r.words.Say("task."+task), url.Values{"site": {site.ID}, "task": {task}}
			if n > 0 {
				q.Set("within", "late")
				overdue.Lines = append(overdue.Lines, line{Text: r.words.Say("digest.overdue_line", "site", site.Name, "n", n, "task", lower(name)), Under: r.words.Say("digest.since", "day", since), Href: r.link("/dates?" + q.Encode())})
			}
			if next > 0 {
				q.Del("within")
				soon.Lines = append(soon.Lines, line{Text: r.words.Say("digest.due_line", "site", site.Name, "n", next, "task", lower(name)), Under: r.words.Say("digest.until", "day", today+Soon), Href: r.link("/dates?" + q.Encode())})
			}
			late, coming = late+n, coming+next
		}
	}
	return overdue, soon, late, coming, nil
}

func lower(s string) string {
	if s == "" {
		return s
	}
	return strings.ToLower(s[:1]) + s[1:]
}

func (r reader) certificates() (section, error) {
	s := section{Head: r.words.Say("digest.certificates"), Href: r.link("/set-up")}
	today := forms.DayOf(r.now)
	instruments, err := r.v.Instruments()
	for _, i := range instruments {
		if i.Retired || i.CalibrationDue == forms.NoDay || i.CalibrationDue > today+certificates {
			continue
		}
		key := "digest.ends"
		if i.CalibrationDue < today {
			key = "digest.ended"
		}
		s.Lines = append(s.Lines, line{Text: export.Printable(joined(i.Name, i.Serial)) + ": " + r.words.Say(key, "day", i.CalibrationDue), Href: s.Href})
	}
	return s, err
}

// rounds lists those that wait to be accepted.
func (r reader) rounds() (section, error) {
	s := section{Head: r.words.Say("digest.rounds"), Href: r.link("/rounds")}
	rounds, err := r.v.Rounds("")
	if err != nil {
		return s, err
	}
	for _, one := range rounds {
		if one.State != store.RoundEnded || len(s.Lines) >= most {
			continue
		}
		site, err := r.v.Site(one.Site)
		if err != nil {
			return s, err
		}
		of := 0
		for _, n := range one.Counts {
			of += n
		}
		s.Lines = append(s.Lines, line{Text: r.words.Say("digest.round_line", "site", site.Name, "day", one.Day, "done", strconv.Itoa(one.Counts[store.StopDone]), "of", of), Href: r.link("/rounds/" + one.ID)})
	}
	return s, nil
}

// message is what both forms of the digest are written from.
type message struct {
	Subject, Base, Foot, Demo string
	Settings, SettingsHref    string
	Sections                  []section
}

func (m message) write() (Digest, error) {
	var page bytes.Buffer
	if err := htmlForm.Execute(&page, m); err != nil {
		return Digest{}, fmt.Errorf("digest: %w", err)
	}
	return Digest{Subject: export.Printable(m.Subject), Text: m.text(), HTML: page.String()}, nil
}

func (m message) text() string {
	var b strings.Builder
	if m.Demo != "" {
		b.WriteString(m.Demo + "\n\n")
	}
	b.WriteString(m.Subject + "\n")
	for _, s := range m.Sections {
		b.WriteString("\n" + s.Head + "\n")
		for _, l := range s.Lines {
			b.WriteString("- " + l.Text)
			if l.Under != "" {
				b.WriteString(" (" + l.Under + ")")
			}
			b.WriteString("\n")
			if l.Href != "" {
				b.WriteString("  " + l.Href + "\n")
			}
		}
		if s.More != "" {
			b.WriteString("  " + s.More + " " + s.Href + "\n")
		}
	}
	b.WriteString("\n" + m.Foot + "\n")
	if m.SettingsHref != "" {
		b.WriteString(m.Settings + " " + m.SettingsHref + "\n")
	}
	return b.String()
}

// htmlForm carries its few styles in its elements: readers of mail drop sheets. No picture, nothing fetched.
var htmlForm = template.Must(template.New("digest").Parse(`<!doctype html>
<html lang="en"><head><meta charset="utf-8"><title>{{.Subject}}</title></head>
<body style="margin:0;padding:16px;background:#ffffff;color:#1f2328;font:16px/1.5 sans-serif">
{{- with .Demo}}<p style="border:1px solid #7a5600;padding:4px 8px">{{.}}</p>{{end}}
<h1 style="font:600 22px/1.3 Georgia,serif;margin:0 0 12px">{{.Subject}}</h1>
{{- range .Sections}}
<h2 style="font:600 18px/1.3 Georgia,serif;margin:24px 0 8px;border-bottom:1px solid #d8d2c4;padding-bottom:4px">{{.Head}}</h2>
<ul style="margin:0;padding-left:20px">
{{- range .Lines}}<li style="margin:0 0 6px">{{if .Href}}<a href="{{.Href}}" style="color:#a1491c">{{.Text}}</a>{{else}}{{.Text}}{{end}}{{with .Under}}<br><span style="color:#57534a;font-size:14px">{{.}}</span>{{end}}</li>
{{end -}}
</ul>{{if .More}}<p style="margin:8px 0 0">{{if .Href}}<a href="{{.Href}}" style="color:#a1491c">{{.More}}</a>{{else}}{{.More}}{{end}}</p>{{end}}
{{- end}}
<p style="margin:24px 0 0;color:#57534a;font-size:14px">{{.Foot}}{{with .SettingsHref}} <a href="{{.}}" style="color:#a1491c">{{$.Settings}}</a>{{end}}</p>
</body></html>
`))
