package store

import (
	"bytes"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"encoding/json"
	"fmt"
	"time"

	"tripwell/store/record"
)

// refusedBody is the body of record.refused.
type refusedBody struct {
	ID     string `json:"id,omitempty"`
	SHA256 string `json:"sha256"`
	From   string `json:"from,omitempty"`
	N      int64  `json:"n,omitempty"`
	Code   string `json:"code"`
}

// refuse keeps the exact bytes of a record that may not stand in the book and says so by a record.refused: in the log
// it names where its sender may write there, else in office. The same bytes are refused once.
func (g *group) refuse(from Sender, r *record.Record, f *record.Fault, received time.Time) (Receipt, error) {
	sum := sha256.Sum256(r.Raw)
	if rc, ok, err := g.refusedBefore(r, sum); ok || err != nil {
		return rc, err
	}
	log, err := g.refusalLog(from, r, received)
	if err != nil {
		return Receipt{}, err
	}
	subject := r.ID
	own := newID(received)
	if subject == "" {
		subject = own
	}
	body := refusedBody{r.ID, hex.EncodeToString(sum[:]), r.From, r.N, f.Code}
	made, st, err := g.make(Draft{ID: own, Kind: "record.refused", Log: log, Subject: subject, At: received, By: g.s.id, Body: body}, received)
	if err != nil {
		return Receipt{}, err
	}
	if _, err := g.accept(made, st); err != nil {
		return Receipt{}, err
	}
	v := make([]byte, 2, 2+len(f.Text)+len(r.Raw))
	binary.BigEndian.PutUint16(v, uint16(len(f.Text)))
	v = append(append(v, f.Text...), r.Raw...)
	if err := g.tx.Bucket(bktQuar).Put(key64(g.seq), v); err != nil {
		return Receipt{}, fmt.Errorf("keep refused record: %w", err)
	}
	if err := g.tx.Bucket(bktQuarSHA).Put(sum[:], key64(g.seq)); err != nil {
		return Receipt{}, fmt.Errorf("keep refused record: %w", err)
	}
	g.refused = true
	return g.refusedReceipt(r, f.Code, f.Text), nil
}

func (g *group) refusedReceipt(r *record.Record, code, text string) Receipt {
	return Receipt{ID: r.ID, State: "refused", Store: g.s.id, Epoch: g.s.epoch, Log: r.Log, Code: code, Text: text}
}

// refusedBefore answers bytes that are in quarantine already.
func (g *group) refusedBefore(r *record.Record, sum [32]byte) (Receipt, bool, error) {
	seq := g.tx.Bucket(bktQuarSHA).Get(sum[:])
	if seq == nil {
		return Receipt{}, false, nil
	}
	ref, err := readRefusal(g.recs.Get(seq), g.tx.Bucket(bktQuar).Get(seq))
	if err != nil {
		return Receipt{}, false, err
	}
	return g.refusedReceipt(r, ref.Code, ref.Text), true, nil
}

// refusalLog gives the log a refusal is written to.
func (g *group) refusalLog(from Sender, r *record.Record, received time.Time) (string, error) {
	if r.Log == "" || r.Log == record.Office || r.By == "" || !g.hasLog(r.Log) {
		return record.Office, nil
	}
	if from.Owner {
		return r.Log, nil
	}
	facts, err := g.facts(r.By)
	if err != nil {
		return "", err
	}
	enrolled := false
	for _, f := range facts {
		enrolled = enrolled || f.Installation == from.Installation
	}
	may := func(f accessFact) bool { return f.covers(r.Log) && f.Role != "auditor" }
	if r.Log == record.Org {
		may = func(f accessFact) bool { return f.Active && f.All && f.Role == "manager" }
	}
	if r.From == from.Installation && enrolled && grantsIn(facts, r, received, may) {
		return r.Log, nil
	}
	return record.Office, nil
}

// readRefusal puts a refusal together from its record and what is kept of it.
func readRefusal(rec, quar []byte) (Refusal, error) {
	k, err := readRec(rec)
	if err != nil {
		return Refusal{}, fmt.Errorf("refusal: %w", err)
	}
	r, f := record.Parse(append([]byte(nil), k.raw...))
	if f != nil {
		return Refusal{}, fmt.Errorf("refusal: %w", f)
	}
	var body refusedBody
	if err := json.Unmarshal(r.Body, &body); err != nil {
		return Refusal{}, fmt.Errorf("refusal %s: %w", r.ID, err)
	}
	stamp, err := record.ParseStamp(k.stamp)
	if err != nil {
		return Refusal{}, fmt.Errorf("refusal %s: %w", r.ID, err)
	}
	ref := Refusal{Record: body.ID, SHA256: body.SHA256, From: body.From, N: body.N, Code: body.Code, Log: r.Log, Received: stamp.Received}
	if len(quar) >= 2 {
		if n := 2 + int(binary.BigEndian.Uint16(quar)); len(quar) >= n {
			ref.Text, ref.Bytes = string(quar[2:n]), append([]byte(nil), quar[n:]...)
			ref.Sealed = bytes.Equal(quar, sealedRefusal)
		}
	}
	return ref, nil
}

// Refusal is a record kept in quarantine.
type Refusal struct {
	Record, SHA256, From, Code, Text, Log string
	N                                     int64
	Received                              time.Time
	Bytes                                 []byte
	Sealed                                bool // the owner had its bytes dropped
}

// Refused lists what is in quarantine, newest first: of the sites of the scope, and of office for whoever has all.
func (v *View) Refused() ([]Refusal, error) {
	var all []Refusal
	recs, c := v.tx.Bucket(bktRec), v.tx.Bucket(bktQuar).Cursor()
	for k, kept := c.Last(); k != nil; k, kept = c.Prev() {
		ref, err := readRefusal(recs.Get(k), kept)
		if err != nil {
			return nil, err
		}
		if !v.scope.mayRead(ref.Log) {
			continue
		}
		is, err := v.showsRefusal(&ref)
		if err != nil {
			return nil, err
		}
		if is {
			all = append(all, ref)
		}
	}
	return all, nil
}
