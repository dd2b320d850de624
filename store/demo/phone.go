package demo

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"time"

	"tripwell/store"
)

// phone is one installation in the field: it makes records by its own clock, keeps them in its tray and pushes them
// when there is signal, as a real phone does.
type phone struct {
	name, installation string
	person             string        // person id signed in on it
	ahead              time.Duration // how far its clock runs ahead of the world
	last               uint64        // largest stamp it made
	n                  map[string]int64
	tray               []store.Incoming
}

// limits of one push: see the exchange.
const (
	pushRecords = 500
	pushBytes   = 512 << 10
)

// wire is a record in the order its members are written.
type wire struct {
	ID      string `json:"id"`
	Kind    string `json:"kind"`
	V       int    `json:"v"`
	Log     string `json:"log"`
	Subject string `json:"subject"`
	At      string `json:"at"`
	Clock   string `json:"clock"`
	By      string `json:"by"`
	From    string `json:"from"`
	N       int64  `json:"n"`
	Body    any    `json:"body"`
}

// enrol signs the phone's person in on a new installation.
func enrol(ctx context.Context, s *store.Store, name, person string, at time.Time) (*phone, error) {
	p := &phone{name: name, installation: newID(at, "installation", name), person: person, n: map[string]int64{}}
	if _, err := s.Enrol(ctx, person, p.installation); err != nil {
		return nil, fmt.Errorf("enrol %s: %w", name, err)
	}
	return p, nil
}

// keep makes a record at the world's time at and puts it into the tray; id is made when empty.
func (p *phone) keep(id, kind, log, subject string, at time.Time, body any) (string, error) {
	at = at.Add(p.ahead)
	p.n[log]++
	if id == "" {
		id = newID(at, p.installation, log, fmt.Sprint(p.n[log]))
	}
	if subject == "" {
		subject = id
	}
	p.last = max(uint64(at.UnixMilli())<<16, p.last+1)
	var out bytes.Buffer
	enc := json.NewEncoder(&out)
	enc.SetEscapeHTML(false)
	if err := enc.Encode(wire{id, kind, 1, log, subject, at.Format(time.RFC3339), fmt.Sprintf("%016x", p.last), p.person, p.installation, p.n[log], body}); err != nil {
		return "", fmt.Errorf("%s of %s: %w", kind, p.name, err)
	}
	p.tray = append(p.tray, store.Incoming{Record: bytes.TrimSuffix(out.Bytes(), []byte("\n"))})
	return id, nil
}

// push sends what is in the tray; every record must be stored.
func (p *phone) push(ctx context.Context, s *store.Store, now time.Time) error {
	for len(p.tray) > 0 {
		n, size := 0, 0
		for n < len(p.tray) && n < pushRecords {
			if size += len(p.tray[n].Record) + 64; n > 0 && size > pushBytes {
				break
			}
			n++
		}
		receipts, err := s.Push(ctx, store.Sender{Installation: p.installation, Sent: now.Add(p.ahead)}, p.tray[:n])
		if err != nil {
			return fmt.Errorf("push of %s: %w", p.name, err)
		}
		for i, r := range receipts {
			if r.State != "stored" {
				return fmt.Errorf("push of %s: %s is %s, not stored (%s: %s)", p.name, p.tray[i].Record, r.State, r.Code, r.Text)
			}
		}
		p.tray = p.tray[n:]
	}
	return nil
}
