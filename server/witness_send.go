package server

import (
	"context"
	"html"
	"strings"

	"tripwell/export/digest"
	"tripwell/store"
	"tripwell/store/proof"
)

// sendHeads sends the month's signed head to the mailboxes of witnesses. A head in a mailbox outside the house cannot be called
// back: a later bundle is held against it.
func (s *Server) sendHeads(ctx context.Context, settings store.MailSettings) {
	if len(settings.Witnesses) == 0 {
		return
	}
	begun, err := s.store.BeginWitness(ctx)
	if err != nil || !begun {
		if err != nil {
			s.log.Error("head for witnesses", "err", err)
		}
		return
	}
	message, err := s.headMessage()
	var faults []string
	if err != nil {
		faults = append(faults, mailFault(err))
	}
	for _, to := range settings.Witnesses {
		if err != nil {
			break
		}
		if err := s.send(ctx, settings, to, message); err != nil {
			faults = append(faults, to+": "+mailFault(err))
		}
	}
	if len(faults) == 0 {
		return
	}
	fault := strings.Join(faults, "; ")
	s.log.Warn("head not sent to all witnesses", "fault", fault)
	if err := s.store.EndWitness(context.WithoutCancel(ctx), fault); err != nil {
		s.log.Error("head for witnesses", "err", err)
	}
}

// headMessage is the head with its key, to be kept.
func (s *Server) headMessage() (digest.Digest, error) {
	head, err := s.store.SignedHead()
	if err != nil {
		return digest.Digest{}, err
	}
	key, err := s.store.HeadKey()
	if err != nil {
		return digest.Digest{}, err
	}
	k := s.ink()
	subject := k.say("office.witness.subject", "month", s.store.Now().UTC().Format("2006-01"))
	if s.store.Demo() {
		subject = k.say("sheet.demo_mark") + " · " + subject
	}
	text := strings.Join([]string{k.say("office.witness.text"), head, k.say("office.witness.key"), key, k.say("office.witness.fingerprint", "print", proof.Fingerprint(key))}, "\n\n") + "\n"
	return digest.Digest{Subject: subject, Text: text, HTML: "<pre>" + html.EscapeString(text) + "</pre>"}, nil
}
