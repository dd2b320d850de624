package store

import (
	"bytes"
	"context"
	"encoding/binary"
	"encoding/hex"
	"errors"
	"fmt"
	"strings"
	"time"

	"tripwell/store/record"
)

// Admit lets a refused record into the book after all: its exact bytes take the next place of the log they name, beside a
// record.admitted by the scope's person with the reason. Only a manager of that site (of the organisation, for org) may, and only what
// can stand in a book: bytes that are no record, kinds a store alone writes, and ids that are taken stay where they are. A record that
// was admitted before is answered `already`.
func (s *Store) Admit(ctx context.Context, sc Scope, sha256, reason string) (Receipt, error) {
	reason = strings.TrimSpace(reason)
	if reason == "" {
		return Receipt{}, &Error{Code: "invalid", Field: "reason", Text: "Say why this record may stand in the book after all."}
	}
	sum, err := hex.DecodeString(sha256)
	if err != nil || len(sum) != 32 {
		return Receipt{}, errNotAside
	}
	received := s.now().UTC().Truncate(time.Millisecond)
	var receipt Receipt
	err = s.do(ctx, 2, func(g *group) error {
		raw, err := g.asideBytes(sum)
		if err != nil {
			return err
		}
		r, err := admissible(sc, raw)
		if err != nil {
			return err
		}
		had, ok, err := g.find(r.ID)
		if err != nil {
			return err
		}
		same := false
		if ok {
			if same, _, err = g.isSame(had, raw); err != nil {
				return err
			}
		}
		if same {
			receipt = g.receipt(r.ID, "already", had.log, had.pos)
			return nil
		}
		if ok {
			return cannotAdmit("Another record carries its id, and the first one stays.")
		}
		if !g.hasLog(r.Log) {
			return cannotAdmit("No site here has the log it names. Register the site first.")
		}
		pos, err := g.accept(r, stampFor(raw, record.Stamp{Received: received}))
		var fault *record.Fault
		if errors.As(err, &fault) {
			return cannotAdmit(fault.Text)
		}
		if err != nil {
			return err
		}
		receipt = g.receipt(r.ID, "stored", r.Log, pos)
		_, err = g.appendDrafts([]Draft{{Kind: "record.admitted", Log: r.Log, Subject: r.ID, At: received, By: sc.Person, Body: mustJSON(map[string]string{"reason": reason})}})
		return err
	})
	return receipt, err
}

var errNotAside = &Error{Code: "not_found", Field: "record", Text: "No refused record has these bytes. Load the page again."}

func cannotAdmit(why string) error {
	return &Error{Code: "conflict", Field: "record", Text: "This record cannot be taken into the book. " + why}
}

// asideBytes gives what is kept of a refusal, by the hash of its bytes.
func (g *group) asideBytes(sum []byte) ([]byte, error) {
	seq := g.tx.Bucket(bktQuarSHA).Get(sum)
	if seq == nil {
		return nil, errNotAside
	}
	kept := g.tx.Bucket(bktQuar).Get(seq)
	if len(kept) < 2 || len(kept) < 2+int(binary.BigEndian.Uint16(kept)) {
		return nil, fmt.Errorf("refused record %x: its bytes are not there", sum)
	}
	return bytes.Clone(kept[2+int(binary.BigEndian.Uint16(kept)):]), nil
}

// admissible reads refused bytes as a record somebody may admit.
func admissible(sc Scope, raw []byte) (*record.Record, error) {
	r, fault := record.Parse(raw)
	if fault != nil {
		return nil, cannotAdmit(fault.Text)
	}
	if storeKinds[r.Kind] || r.Log == record.Office {
		return nil, cannotAdmit("Records of kind " + r.Kind + " are written by the store itself only.")
	}
	if sc.Role != "manager" || !sc.May(r.Log) {
		return nil, &Error{Code: "forbidden", Field: "record", Text: "Only a manager of the site this record belongs to may take it into the book. Ask one."}
	}
	return r, nil
}

// Admissible tells whether a refused record could be admitted by the scope: whether a page should offer it. Stands: it is in the book
// by now, under its id.
func (v *View) Admissible(ref Refusal) (may bool, stands string) {
	r, err := admissible(v.scope, bytes.Clone(ref.Bytes))
	if err != nil {
		return false, ""
	}
	if rec, _, err := v.Record(r.ID); err == nil {
		if bytes.Equal(rec, ref.Bytes) {
			return false, r.ID
		}
		return false, ""
	}
	return true, ""
}
