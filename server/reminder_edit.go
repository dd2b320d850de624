package server

import (
	"net/http"
	"strconv"
	"time"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// reminderPage is where a person finds their calendar address and says which digest they want.
type reminderPage struct {
	Frame
	Heading, Under string
	Feed, Made     string // the address, the one time it can be shown; since when there is one
	Action, Submit string
	Revoke         *link
	Digest         formPage
	Said           []notice
	NoMail         string
	Mail           *link
}

func (s *Server) remindersShow(c echo.Context) error {
	f, err := s.blankForm(nil)
	if err != nil {
		return err
	}
	d, _, err := s.store.Digest(person(c).ID)
	if err != nil {
		return err
	}
	s.digestValues(c, d, f)
	return s.remindersBack(c, f, d, "")
}

// digestValues fills the form with what a person chose, or with what suits most.
func (s *Server) digestValues(c echo.Context, d store.Digest, f *typedForm) {
	if d.Zone == "" {
		d.Zone, d.Hour, d.Weekday = s.ownZone(c), 7, time.Monday
		if contact := person(c).Contact; store.IsMailAddress(contact) {
			d.To = contact
		}
	}
	for name, value := range map[string]string{"every": d.Every, "weekday": strconv.Itoa(int(d.Weekday)), "hour": strconv.Itoa(d.Hour), "zone": d.Zone, "to": d.To} {
		f.Set(name, value)
	}
}

// ownZone is the zone of the first site a person has.
func (s *Server) ownZone(c echo.Context) string {
	sites, err := s.sitesOf(c)
	if err != nil || len(sites) == 0 || sites[0].Zone == "" {
		return "UTC"
	}
	return sites[0].Zone
}

// remindersBack sends the page; token is a calendar address just made.
func (s *Server) remindersBack(c echo.Context, f *typedForm, d store.Digest, token string) error {
	k := s.ink()
	view := reminderPage{Frame: s.frame(c, k.say("office.reminder.title"), "dates"), Heading: k.say("office.reminder.title"), Under: k.say("office.reminder.lead"),
		Action: "/reminders/calendar", Submit: k.say("office.reminder.make")}
	since, made, err := s.store.FeedSince(person(c).ID)
	if err != nil {
		return err
	}
	if made {
		view.Submit, view.Revoke = k.say("office.reminder.make_new"), &link{Href: "/reminders/calendar/revoke", Text: k.say("office.reminder.revoke")}
		view.Made = k.say("office.reminder.made", "time", k.at(since, d.Location()))
	}
	if token != "" {
		view.Feed, view.Made = origin(c.Request())+"/calendar/"+token+".ics", ""
	}
	if _, set, err := s.store.MailSettings(); err != nil {
		return err
	} else if !set {
		view.NoMail = k.say("office.reminder.no_mail")
	}
	if person(c).All && person(c).Role == "manager" {
		view.Mail = &link{Href: "/mail", Text: k.say("office.mail.title")}
	}
	view.Digest = s.digestForm(c)
	view.Said = s.digestSaid(d)
	f.fill(&view.Digest)
	status := http.StatusOK
	if !f.ok() {
		status = http.StatusUnprocessableEntity
	}
	return s.page(c, status, "reminders.html", view)
}

func (s *Server) digestForm(c echo.Context) formPage {
	k := s.ink()
	days := []string{}
	for i := range 7 {
		day := (i + 1) % 7 // from Monday
		days = append(days, strconv.Itoa(day), k.list("office.day.wd_long", day))
	}
	hours := []string{}
	for h := range 24 {
		hours = append(hours, strconv.Itoa(h), time.Date(2000, 1, 1, h, 0, 0, 0, time.UTC).Format("15:04"))
	}
	return formPage{Frame: s.frame(c, "", ""), Action: "/reminders/digest", Submit: k.say("office.reminder.save"), Groups: []fieldGroup{{Fields: []field{
		{Name: "every", Label: k.say("office.reminder.every"), Options: choices("", "", k.say("office.reminder.none"), "daily", k.say("office.reminder.daily"), "weekly", k.say("office.reminder.weekly"))},
		{Name: "weekday", Label: k.say("office.reminder.weekday"), Options: choices("", days...)},
		{Name: "hour", Label: k.say("office.reminder.hour"), Options: choices("", hours...)},
		{Name: "zone", Label: k.say("office.reminder.zone"), Known: zonesOffered},
		{Name: "to", Label: k.say("office.reminder.to"), Type: "email"},
	}}}}
}

// digestSaid says what became of the last digest.
func (s *Server) digestSaid(d store.Digest) []notice {
	k := s.ink()
	var out []notice
	switch {
	case d.Every == "" && d.Sent.IsZero():
	case d.Open && s.store.Now().Sub(d.At) > sendTimeout:
		out = append(out, notice{Shape: "watch", Text: k.say("office.reminder.open", "time", k.at(d.At, d.Location()))})
	case d.Fault != "":
		out = append(out, notice{Shape: "fail", Text: k.say("office.reminder.fault", "time", k.at(d.At, d.Location()), "text", d.Fault)})
	}
	if !d.Sent.IsZero() {
		out = append(out, notice{Shape: "pass", Text: k.say("office.reminder.sent", "time", k.at(d.Sent, d.Location()))})
	}
	return out
}

func (s *Server) digestUpdate(c echo.Context) error {
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	d := store.Digest{Person: person(c).ID, Every: f.choice("every", "", "daily", "weekly"), Zone: f.line("zone", 60), To: f.line("to", 200)}
	day, err := strconv.Atoi(f.Get("weekday"))
	hour, wrong := strconv.Atoi(f.Get("hour"))
	if err != nil || wrong != nil {
		f.refuse("hour", s.words.Say("office.form.choice"))
	}
	d.Weekday, d.Hour = time.Weekday(day), hour
	if f.ok() {
		err := s.store.PutDigest(c.Request().Context(), d)
		if err == nil {
			return toPage(c, "/reminders")
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.remindersBack(c, f, store.Digest{Person: d.Person, Day: forms.NoDay}, "")
}

// feedMake makes a new calendar address and shows it this once.
func (s *Server) feedMake(c echo.Context) error {
	token, err := s.store.NewFeed(c.Request().Context(), person(c).ID)
	if err != nil {
		return err
	}
	f, err := s.blankForm(nil)
	if err != nil {
		return err
	}
	d, _, err := s.store.Digest(person(c).ID)
	if err != nil {
		return err
	}
	s.digestValues(c, d, f)
	return s.remindersBack(c, f, d, token)
}

func (s *Server) feedRevoke(c echo.Context) error {
	if err := s.store.DropFeed(c.Request().Context(), person(c).ID); err != nil {
		return err
	}
	return toPage(c, "/reminders")
}
