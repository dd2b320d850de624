package store

import (
	"cmp"
	"context"
	"crypto/x509"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"net/mail"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"go.etcd.io/bbolt"

	"tripwell/forms"
)

// How a mail server is spoken to.
const (
	MailStartTLS = "starttls" // must turn to TLS before anything is said
	MailTLS      = "tls"      // from the first byte
	MailPlain    = "none"     // a server on this machine or network that has none
)

// MailSettings say how messages leave. The password is kept beside the signing key, in DIR/keys, and never handed to pages.
type MailSettings struct {
	Host string `json:"host"`
	Port int    `json:"port"`
	TLS  string `json:"tls"`
	User string `json:"user,omitempty"` // "": the server asks for none
	From string `json:"from"`
	Link string `json:"link,omitempty"` // address of the office, for links in messages
	// Trust is the certificate authority of a house's own mail server, as PEM; "" trusts those the machine does.
	Trust string `json:"trust,omitempty"`
	// Witnesses are mailboxes outside the house that get a signed head every month.
	Witnesses []string `json:"witnesses,omitempty"`
}

// witnessesMost bounds the list.
const witnessesMost = 10

const mailFile = "mail.secret"

// MailSettings gives how messages leave; ok is false where nobody has said.
func (s *Store) MailSettings() (m MailSettings, ok bool, err error) {
	err = s.view(func(tx *bbolt.Tx) error {
		v := tx.Bucket(bktSetting).Get(settingMail)
		if ok = v != nil; !ok {
			return nil
		}
		return json.Unmarshal(v, &m)
	})
	return m, ok, err
}

// SetMailSettings keeps how messages leave. secret nil leaves the password as it is, "" takes it away.
func (s *Store) SetMailSettings(ctx context.Context, m MailSettings, secret *string) error {
	m.Host, m.User, m.From = strings.TrimSpace(m.Host), strings.TrimSpace(m.User), strings.TrimSpace(m.From)
	switch {
	case m.Host == "" || strings.ContainsAny(m.Host, " /\r\n\t"):
		return &Error{Code: "invalid", Field: "host", Text: "The mail server is a name or an address, such as mail.example.org."}
	case m.Port < 1 || m.Port > 65535:
		return &Error{Code: "invalid", Field: "port", Text: "The port lies between 1 and 65535; 587 is usual with STARTTLS, 465 with TLS."}
	case m.TLS != MailStartTLS && m.TLS != MailTLS && m.TLS != MailPlain:
		return &Error{Code: "invalid", Field: "tls", Text: "Choose STARTTLS, TLS or none."}
	case m.Trust != "" && !x509.NewCertPool().AppendCertsFromPEM([]byte(m.Trust)):
		return &Error{Code: "invalid", Field: "trust", Text: "This is no certificate. Paste it with its lines BEGIN CERTIFICATE and END CERTIFICATE."}
	case !IsMailAddress(m.From):
		return &Error{Code: "invalid", Field: "from", Text: "The sender is a mail address, such as tests@example.org."}
	}
	if len(m.Witnesses) > witnessesMost || slices.ContainsFunc(m.Witnesses, func(to string) bool { return !IsMailAddress(to) }) {
		return &Error{Code: "invalid", Field: "witnesses", Text: "Write up to ten mail addresses of witnesses, one a line, such as records@example.org."}
	}
	return s.do(ctx, 1, func(g *group) error {
		if secret != nil {
			if err := s.WriteKey(mailFile, []byte(*secret)); err != nil {
				return err
			}
		}
		return g.putJSON(bktSetting, settingMail, m)
	})
}

// MailSecret gives the password of the mail server, "" where none is kept.
func (s *Store) MailSecret() (string, error) {
	b, err := os.ReadFile(filepath.Join(s.dir, keysDir, mailFile))
	if errors.Is(err, fs.ErrNotExist) {
		return "", nil
	}
	if err != nil {
		return "", fmt.Errorf("password of the mail server: %w", err)
	}
	return string(b), nil
}

// IsMailAddress reports whether s is one plain address (RFC 5322 3.4.1), without a name and without line breaks.
func IsMailAddress(s string) bool {
	a, err := mail.ParseAddress(s)
	return err == nil && a.Address == s && !strings.ContainsAny(s, "\r\n")
}

// Digest is which digest a person wants, and what became of it.
type Digest struct {
	Person  string       `json:"person"`
	Every   string       `json:"every"` // "" = none | daily | weekly
	Weekday time.Weekday `json:"weekday"`
	Hour    int          `json:"hour"` // of day, in Zone
	Zone    string       `json:"zone"`
	To      string       `json:"to"`

	Day   forms.Day `json:"day"`   // the newest day in Zone for which one was tried
	Tries int       `json:"tries"` // on that day
	At    time.Time `json:"at"`    // of the last try
	Sent  time.Time `json:"sent"`  // of the last that the server took
	Fault string    `json:"fault"` // what stood in the way at the last try; "" when it went out, or is under way
	Open  bool      `json:"open"`  // a try began and its end is not known: the program may have stopped in the middle
}

// Location is the zone of the hour, UTC where it is unknown.
func (d Digest) Location() *time.Location { return location(d.Zone) }

// PutDigest keeps which digest a person wants; what became of the last stays.
func (s *Store) PutDigest(ctx context.Context, d Digest) error {
	if d.Every != "" {
		switch {
		case d.Every != "daily" && d.Every != "weekly":
			return &Error{Code: "invalid", Field: "every", Text: "Choose none, daily or weekly."}
		case d.Hour < 0 || d.Hour > 23 || d.Weekday < 0 || d.Weekday > 6:
			return &Error{Code: "invalid", Field: "hour", Text: "Choose an hour of the day from 0 to 23."}
		case !IsMailAddress(d.To):
			return &Error{Code: "invalid", Field: "to", Text: "Write one mail address, such as office@example.org."}
		}
		if _, err := time.LoadLocation(d.Zone); err != nil || d.Zone == "" || d.Zone == "Local" {
			return &Error{Code: "invalid", Field: "zone", Text: "The time zone is none of the list. Choose one such as America/Chicago."}
		}
	}
	return s.do(ctx, 1, func(g *group) error {
		old, _, err := readDigest(g.tx, d.Person)
		if err != nil {
			return err
		}
		d.Day, d.Tries, d.At, d.Sent, d.Fault, d.Open = old.Day, old.Tries, old.At, old.Sent, old.Fault, old.Open
		if local := s.now().In(d.Location()); old.Every == "" && local.Hour() >= d.Hour {
			d.Day = forms.DayOf(local) // today's hour is past: the first comes on the next day
		}
		if old.To != d.To || old.Every == "" { // whoever mends the address is not told of the old one's fault
			d.Fault = ""
		}
		return g.putJSON(bktDigest, idKey(d.Person), d)
	})
}

// Digest gives a person's; ok is false where they never chose.
func (s *Store) Digest(person string) (d Digest, ok bool, err error) {
	err = s.view(func(tx *bbolt.Tx) error {
		d, ok, err = readDigest(tx, person)
		return err
	})
	return d, ok, err
}

func readDigest(tx *bbolt.Tx, person string) (d Digest, ok bool, err error) {
	d = Digest{Person: person, Day: forms.NoDay}
	v := tx.Bucket(bktDigest).Get(idKey(person))
	if v == nil {
		return d, false, nil
	}
	if err := json.Unmarshal(v, &d); err != nil {
		return d, false, fmt.Errorf("digest of %s: %w", person, err)
	}
	return d, true, nil
}

// Digests gives the choices of everybody who may sign in and wants one, by person.
func (s *Store) Digests() (all []Digest, err error) {
	err = s.view(func(tx *bbolt.Tx) error {
		return tx.Bucket(bktDigest).ForEach(func(_, v []byte) error {
			var d Digest
			if err := json.Unmarshal(v, &d); err != nil {
				return fmt.Errorf("digest: %w", err)
			}
			if p, err := readPerson(tx, d.Person); err == nil && p.Active && d.Every != "" {
				all = append(all, d)
			}
			return nil
		})
	})
	slices.SortFunc(all, func(a, b Digest) int { return cmp.Compare(a.Person, b.Person) })
	return all, err
}

// What stands between tries of one day.
const (
	digestTries = 3
	digestPause = 20 * time.Minute
)

// Due says whether a person's digest is to be sent now, and for which day: from its hour on, once a day. What failed is tried again
// twice on the same day; a try whose end is not known is not repeated, for it may have gone out.
func (d Digest) Due(now time.Time) (day forms.Day, due bool) {
	local := now.In(d.Location())
	day = forms.DayOf(local)
	switch {
	case d.Every == "" || local.Hour() < d.Hour, d.Every == "weekly" && local.Weekday() != d.Weekday:
		return day, false
	case d.Day == forms.NoDay || d.Day < day:
		return day, true
	case d.Day > day || d.Fault == "" || d.Open || d.Tries >= digestTries:
		return day, false
	}
	return day, now.Sub(d.At) >= digestPause
}

// BeginDigest notes on the disk that a person's digest of a day is being sent; false where it is not due any more. Only then may
// it be sent: two servers of one file, or a restart, do not send it twice.
func (s *Store) BeginDigest(ctx context.Context, person string) (d Digest, begun bool, err error) {
	err = s.do(ctx, 1, func(g *group) error {
		if d, _, err = readDigest(g.tx, person); err != nil {
			return err
		}
		day, due := d.Due(s.now())
		if !due {
			return nil
		}
		if d.Day != day {
			d.Tries = 0
		}
		d.Day, d.At, d.Open, d.Fault = day, s.now(), true, ""
		d.Tries++
		begun = true
		return g.putJSON(bktDigest, idKey(person), d)
	})
	return d, begun && err == nil, err
}

// EndDigest notes what became of it; fault "" says that the server took it.
func (s *Store) EndDigest(ctx context.Context, person, fault string) error {
	return s.do(ctx, 1, func(g *group) error {
		d, ok, err := readDigest(g.tx, person)
		if err != nil || !ok {
			return err
		}
		if d.Open, d.Fault = false, fault; fault == "" {
			d.Sent = s.now()
		}
		return g.putJSON(bktDigest, idKey(person), d)
	})
}
