package server

import (
	"net/http"
	"net/url"
	"strconv"
	"strings"

	"github.com/labstack/echo/v4"

	"tripwell/export/digest"
	"tripwell/forms"
	"tripwell/store"
)

func (s *Server) mailEdit(c echo.Context) error {
	if err := wholeOrganisation(c); err != nil {
		return err
	}
	m, set, err := s.store.MailSettings()
	if err != nil {
		return err
	}
	if !set {
		m = store.MailSettings{Port: 587, TLS: store.MailStartTLS, Link: origin(c.Request())}
	}
	f, err := s.blankForm(map[string]string{"host": m.Host, "port": strconv.Itoa(m.Port), "tls": m.TLS, "user": m.User, "from": m.From, "link": m.Link, "trust": m.Trust, "witnesses": strings.Join(m.Witnesses, "\n")})
	if err != nil {
		return err
	}
	return s.mailBack(c, f, "")
}

// mailBack sends the page. The password never comes back: neither the one that is kept nor the one just typed.
func (s *Server) mailBack(c echo.Context, f *typedForm, said string) error {
	k := s.ink()
	secret, err := s.store.MailSecret()
	if err != nil {
		return err
	}
	hint := k.say("office.mail.secret_none")
	if secret != "" {
		hint = k.say("office.mail.secret_kept")
	}
	f.Del("secret")
	p := formPage{Frame: s.frame(c, k.say("office.mail.title"), "set-up"), Crumbs: []link{{Href: "/set-up", Text: k.say("office.setup.title")}}, Heading: k.say("office.mail.title"), Lead: k.say("office.mail.lead"),
		Action: "/mail", Submit: k.say("office.mail.save"), Cancel: "/set-up", Groups: []fieldGroup{
			{Legend: k.say("office.mail.group_server"), Fields: []field{
				{Name: "host", Label: k.say("office.mail.host"), Required: true}, {Name: "port", Label: k.say("office.mail.port"), Type: "number", Required: true},
				{Name: "tls", Label: k.say("office.mail.tls"), Options: choices("", store.MailStartTLS, k.say("office.mail.starttls"), store.MailTLS, k.say("office.mail.tls_first"), store.MailPlain, k.say("office.mail.plain")), Hint: k.say("office.mail.tls_hint")},
				{Name: "user", Label: k.say("office.mail.user"), Hint: k.say("office.mail.user_hint")}, {Name: "secret", Label: k.say("office.mail.secret"), Type: "password", Hint: hint},
				{Name: "forget", Label: k.say("office.mail.forget"), Type: "check"},
				{Name: "trust", Label: k.say("office.mail.trust"), Type: "text-area", Wide: true, Hint: k.say("office.mail.trust_hint")},
			}},
			{Legend: k.say("office.mail.group_message"), Fields: []field{{Name: "from", Label: k.say("office.mail.from"), Type: "email", Required: true}, {Name: "link", Label: k.say("office.mail.link"), Type: "url", Hint: k.say("office.mail.link_hint")}}},
			{Legend: k.say("office.witness.group"), Note: k.say("office.witness.note"), Fields: []field{{Name: "witnesses", Label: k.say("office.witness.list"), Type: "text-area", Wide: true, Hint: s.witnessed()}}},
			{Legend: k.say("office.mail.group_test"), Note: k.say("office.mail.test_note"), Fields: []field{{Name: "test_to", Label: k.say("office.mail.test_to"), Type: "email"}}},
		}}
	if said != "" {
		p.Said = said
	}
	return s.formBack(c, f, p)
}

// mailUpdate keeps the settings, and sends a test message with them where an address for it was typed.
func (s *Server) mailUpdate(c echo.Context) error {
	if err := wholeOrganisation(c); err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	port, _ := strconv.Atoi(f.Get("port"))
	m := store.MailSettings{Host: f.line("host", 200), Port: port, TLS: f.Get("tls"), User: f.line("user", 200), From: f.line("from", 200), Link: f.line("link", 200), Trust: strings.TrimSpace(f.Get("trust")), Witnesses: strings.Fields(f.Get("witnesses"))}
	if m.Link != "" && !isWebAddress(m.Link) {
		f.refuse("link", s.words.Say("office.mail.link_bad"))
	}
	to := f.line("test_to", 200)
	if to != "" && !store.IsMailAddress(to) {
		f.refuse("test_to", s.words.Say("office.mail.to_bad"))
	}
	if f.ok() {
		if err := s.store.SetMailSettings(c.Request().Context(), m, mailSecret(f)); err != nil {
			if err := f.takeRefusal(err); err != nil {
				return err
			}
		}
	}
	if !f.ok() || to == "" {
		if f.ok() {
			return toPage(c, "/mail")
		}
		return s.mailBack(c, f, "")
	}
	return s.mailTest(c, f, m, to)
}

// witnessed tells what became of the last head for witnesses.
func (s *Server) witnessed() string {
	k := s.ink()
	w, err := s.store.Witnessed()
	switch {
	case err != nil || w.Month == 0:
		return k.say("office.witness.never")
	case w.Fault != "":
		return k.say("office.witness.failed", "day", k.day(forms.DayOf(w.At.UTC())), "text", w.Fault)
	}
	return k.say("office.witness.sent", "day", k.day(forms.DayOf(w.At.UTC())))
}

// mailSecret is what the form says of the password: nil = leave it.
func mailSecret(f *typedForm) *string {
	none := ""
	switch typed := f.Get("secret"); {
	case f.Get("forget") == "yes":
		return &none
	case typed != "":
		return &typed
	}
	return nil
}

func (s *Server) mailTest(c echo.Context, f *typedForm, m store.MailSettings, to string) error {
	k := s.ink()
	text := k.say("office.mail.test_text")
	err := s.send(c.Request().Context(), m, to, digest.Digest{Subject: k.say("office.mail.test_subject"), Text: text + "\n", HTML: "<p>" + text + "</p>"})
	if err != nil {
		f.refuse("test_to", k.say("office.mail.test_failed", "text", mailFault(err)))
		return s.mailBack(c, f, "")
	}
	f.Set("test_to", "")
	return s.mailBack(c, f, k.say("office.mail.test_sent", "to", to, "time", s.store.Now().UTC().Format(http.TimeFormat)))
}

func isWebAddress(s string) bool {
	u, err := url.Parse(s)
	return err == nil && (u.Scheme == "https" || u.Scheme == "http") && u.Host != "" && u.User == nil
}
