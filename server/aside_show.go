package server

import (
	"cmp"
	"fmt"
	"net/http"
	"strings"
	"time"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// asideMost is how many of each list the page shows, the newest.
const asideMost = 200

// asidePage shows what came and does not stand in the book as it was sent: refused records, named records that came again
// with other values, and numbers that never came.
type asidePage struct {
	Frame
	Crumbs         []link
	Heading, Under string
	Problem        string // of a form whose record is not shown here
	Refused        []asideRecord
	Photos         []asidePhoto
	Differ         []asideRecord
	Gaps           []gapShown
	Heads          []asideHead
	Cut            string // "" where everything is shown
}

// asideRecord is one record that came, with why it does not stand.
type asideRecord struct {
	Head, Text, Under, Record string
	Admit                     string // SHA-256 of the bytes, where they may be taken into the book after all
	Problem, Reason           string // what is wrong with what was typed, and that
	Changes                   []change
	Bytes                     string
}

// asidePhoto is a photo that was not taken, with the entry that names it.
type asidePhoto struct{ Href, Head, Text string }

// asideHead is a head that a phone knew and does not find continued in the book.
type asideHead struct{ Head, Text, Root, Installation, Log string }

type gapShown struct{ Log, Person, Numbers, Mono string }

func (s *Server) asideShow(c echo.Context) error {
	return s.asidePage(c, http.StatusOK, asideRecord{})
}

// asidePage shows the page; typed is what came back of the form of one record.
func (s *Server) asidePage(c echo.Context, status int, typed asideRecord) error {
	k := s.ink()
	view := asidePage{Frame: s.frame(c, k.say("office.aside.title"), "set-up"), Crumbs: []link{{Href: "/set-up", Text: k.say("office.setup.title")}},
		Under: k.say("office.aside.under"), Problem: typed.Problem}
	err := s.store.View(scope(c), func(v *store.View) error {
		names, err := logNames(v, k)
		if err != nil {
			return err
		}
		refused, err := v.Refused()
		if err != nil {
			return err
		}
		differ, err := v.Differences()
		if err != nil {
			return err
		}
		gaps, err := v.Gaps()
		if err != nil {
			return err
		}
		if view.Heads, err = s.asideHeads(v, names); err != nil {
			return err
		}
		view.Heading = k.say("office.aside.heading", "n", len(refused)+len(differ))
		if len(refused) > asideMost || len(differ) > asideMost || len(gaps) > asideMost {
			view.Cut = k.say("office.aside.cut", "n", asideMost)
		}
		for _, r := range refused[:min(len(refused), asideMost)] {
			shown := s.refusedRecord(v, r, names)
			if shown.Admit != "" && shown.Admit == typed.Admit {
				shown.Problem, shown.Reason, view.Problem = typed.Problem, typed.Reason, ""
			}
			view.Refused = append(view.Refused, shown)
		}
		if view.Photos, err = s.refusedPhotos(v); err != nil {
			return err
		}
		for _, d := range differ[:min(len(differ), asideMost)] {
			view.Differ = append(view.Differ, s.differingRecord(v, d, names))
		}
		for _, g := range gaps[:min(len(gaps), asideMost)] {
			numbers := fmt.Sprint(g.From)
			if g.To > g.From {
				numbers += "–" + fmt.Sprint(g.To)
			}
			view.Gaps = append(view.Gaps, gapShown{cmp.Or(names[g.Log], g.Log), s.personName(v, g.Person), numbers, g.Installation})
		}
		return nil
	})
	if err != nil {
		return err
	}
	return s.page(c, status, "aside.html", view)
}

// asideAdmit takes a refused record into the book after all, for the reason typed.
func (s *Server) asideAdmit(c echo.Context) error {
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	reason := f.line("reason", 500)
	if f.ok() {
		_, err = s.store.Admit(c.Request().Context(), scope(c), f.Get("sha256"), reason)
		if err == nil {
			return toPage(c, "/kept-aside")
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.asidePage(c, http.StatusUnprocessableEntity, asideRecord{Admit: f.Get("sha256"), Reason: f.Get("reason"), Problem: cmp.Or(f.text, f.wrong["reason"])})
}

// asideHead takes away what a phone reported of a head, once somebody has looked into it.
func (s *Server) asideHead(c echo.Context) error {
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	if err := s.store.DropHeadDoubt(c.Request().Context(), scope(c), f.Get("installation"), f.Get("log")); err != nil {
		return err
	}
	return toPage(c, "/kept-aside")
}

func (s *Server) asideHeads(v *store.View, names map[string]string) (list []asideHead, err error) {
	doubts, err := v.HeadDoubts()
	k := s.ink()
	for _, d := range doubts {
		list = append(list, asideHead{
			Head: joined(cmp.Or(names[d.Log], d.Log), s.personName(v, d.Person), k.at(d.At, time.UTC)),
			Text: k.say("office.aside.head_text", "n", d.Size), Root: d.Root, Installation: d.Installation, Log: d.Log,
		})
	}
	return list, err
}

func (s *Server) refusedPhotos(v *store.View) (list []asidePhoto, err error) {
	refused, err := v.PhotosRefused()
	if err != nil {
		return nil, err
	}
	for _, r := range refused[:min(len(refused), asideMost)] {
		e, err := v.Entry(r.Entry)
		if err != nil {
			return nil, err
		}
		head := joined(s.personName(v, e.By), s.ink().at(r.At, time.UTC))
		if d, err := v.Device(e.Device, forms.NoDay); err == nil {
			head = joined(s.spot(d.DeviceRow), head)
		}
		list = append(list, asidePhoto{"/entries/" + r.Entry, head, r.Text})
	}
	return list, nil
}

func (s *Server) refusedRecord(v *store.View, r store.Refusal, names map[string]string) asideRecord {
	k := s.ink()
	shown := asideRecord{
		Head: joined(k.at(r.Received, time.UTC), cmp.Or(names[r.Log], r.Log)), Text: cmp.Or(r.Text, r.Code),
		Bytes: strings.ToValidUTF8(string(r.Bytes), "\uFFFD"),
	}
	shown.Under = k.say("office.aside.hash", "sum", r.SHA256)
	if may, stands := v.Admissible(r); may {
		shown.Admit = r.SHA256
	} else if stands != "" {
		shown.Record = "/records/" + stands
	}
	if holder := v.Holder(r.From); holder != "" {
		shown.Head = joined(shown.Head, s.personName(v, holder))
	}
	return shown
}

func (s *Server) differingRecord(v *store.View, d store.Difference, names map[string]string) asideRecord {
	k := s.ink()
	shown := asideRecord{
		Head: joined(k.named("record", d.Kind), cmp.Or(names[d.Log], d.Log), k.at(d.Received, time.UTC)), Record: "/records/" + d.Record,
		Text: k.say("office.aside.differs", "by", s.personName(v, d.By)), Bytes: strings.ToValidUTF8(string(d.Bytes), "\uFFFD"),
	}
	for _, value := range d.Values {
		name := value.Path
		if field, ok := strings.CutPrefix(name, "set."); ok {
			name = s.fieldName(field)
		}
		shown.Changes = append(shown.Changes, change{name, cmp.Or(value.Stands, dash), cmp.Or(value.Came, dash)})
	}
	return shown
}

// logNames are what people call the logs of the scope.
func logNames(v *store.View, k ink) (map[string]string, error) {
	sites, err := v.Sites()
	names := map[string]string{"org": k.say("office.aside.log_org"), "office": k.say("office.aside.log_office")}
	for _, site := range sites {
		names[site.ID] = site.Name
	}
	return names, err
}
