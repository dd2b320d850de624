package server

import (
	"context"
	"crypto/tls"
	"crypto/x509"
	"errors"
	"fmt"
	"net/textproto"
	"strings"
	"time"

	"github.com/wneessen/go-mail"

	"tripwell/export/digest"
	"tripwell/store"
)

// sendTimeout bounds one message, from the dial to the server's last word.
const sendTimeout = 60 * time.Second

// remindEvery is how often it is looked whether a digest is due; the decision itself is the store's, by its own clock.
const remindEvery = time.Minute

// remind sends the digests that fall due until ctx ends.
func (s *Server) remind(ctx context.Context) {
	tick := time.NewTicker(remindEvery)
	defer tick.Stop()
	for {
		s.sendDue(ctx)
		select {
		case <-ctx.Done():
			return
		case <-tick.C:
		}
	}
}

// sendDue sends every digest that is due now. A person's fault is theirs alone: the others get theirs.
func (s *Server) sendDue(ctx context.Context) {
	settings, set, err := s.store.MailSettings()
	if err != nil || !set {
		if err != nil {
			s.log.Error("digests", "err", err)
		}
		return
	}
	s.sendHeads(ctx, settings)
	all, err := s.store.Digests()
	if err != nil {
		s.log.Error("digests", "err", err)
		return
	}
	for _, d := range all {
		if _, due := d.Due(s.store.Now()); !due || ctx.Err() != nil {
			continue
		}
		d, begun, err := s.store.BeginDigest(ctx, d.Person)
		if err != nil || !begun {
			continue
		}
		fault := ""
		if err := s.sendDigest(ctx, settings, d); err != nil {
			fault = mailFault(err)
			s.log.Warn("digest not sent", "person", d.Person, "fault", fault)
		}
		// A server that is being stopped still notes that the message went out.
		if err := s.store.EndDigest(context.WithoutCancel(ctx), d.Person, fault); err != nil {
			s.log.Error("digest", "person", d.Person, "err", err)
		}
	}
}

func (s *Server) sendDigest(ctx context.Context, settings store.MailSettings, d store.Digest) error {
	p, err := s.store.Person(d.Person)
	if err != nil {
		return err
	}
	var made digest.Digest
	err = s.store.View(p.Scope(), func(v *store.View) (err error) {
		made, err = digest.Of(v, s.store.Now(), settings.Link, s.store.Demo())
		return err
	})
	if err != nil {
		return err
	}
	return s.send(ctx, settings, d.To, made)
}

// send hands one message to the mail server.
func (s *Server) send(ctx context.Context, settings store.MailSettings, to string, d digest.Digest) error {
	m := mail.NewMsg()
	if err := m.FromFormat(s.words.Say("office.name"), settings.From); err != nil {
		return fmt.Errorf("sender: %w", err)
	}
	if err := m.To(to); err != nil {
		return fmt.Errorf("recipient: %w", err)
	}
	m.Subject(d.Subject)
	m.SetDateWithValue(s.store.Now())
	m.SetMessageID()
	m.SetGenHeader("Auto-Submitted", "auto-generated") // RFC 3834 5: nobody's holiday answers it
	if settings.Link != "" {
		m.SetGenHeader(mail.HeaderListUnsubscribe, "<"+strings.TrimSuffix(settings.Link, "/")+"/reminders>") // RFC 2369 3.2
	}
	m.SetBodyString(mail.TypeTextPlain, d.Text)
	m.AddAlternativeString(mail.TypeTextHTML, d.HTML)
	client, err := s.mailClient(settings)
	if err != nil {
		return err
	}
	ctx, cancel := context.WithTimeout(ctx, sendTimeout)
	defer cancel()
	return client.DialAndSendWithContext(ctx, m)
}

func (s *Server) mailClient(settings store.MailSettings) (*mail.Client, error) {
	options := []mail.Option{mail.WithPort(settings.Port), mail.WithTimeout(sendTimeout / 3)}
	if settings.Trust != "" {
		roots := x509.NewCertPool()
		roots.AppendCertsFromPEM([]byte(settings.Trust))
		options = append(options, mail.WithTLSConfig(&tls.Config{RootCAs: roots, ServerName: settings.Host, MinVersion: tls.VersionTLS12}))
	}
	switch settings.TLS {
	case store.MailTLS:
		options = append(options, mail.WithSSL())
	case store.MailStartTLS:
		options = append(options, mail.WithTLSPolicy(mail.TLSMandatory))
	default:
		options = append(options, mail.WithTLSPolicy(mail.NoTLS))
	}
	if settings.User != "" {
		secret, err := s.store.MailSecret()
		if err != nil {
			return nil, err
		}
		options = append(options, mail.WithSMTPAuth(mail.SMTPAuthAutoDiscover), mail.WithUsername(settings.User), mail.WithPassword(secret))
	}
	client, err := mail.NewClient(settings.Host, options...)
	if err != nil {
		return nil, fmt.Errorf("mail server %s: %w", settings.Host, err)
	}
	return client, nil
}

// mailFault is what stood in the way, in the server's own words where it said some.
func mailFault(err error) string {
	var said *textproto.Error
	if errors.As(err, &said) {
		return fmt.Sprintf("%d %s", said.Code, said.Msg)
	}
	text := strings.Join(strings.Fields(err.Error()), " ")
	return text[:min(len(text), 500)]
}
