package store

import (
	"bytes"
	"cmp"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"time"

	"tripwell/forms"
	"tripwell/store/record"
)

// Certificate is one calibration of an instrument.
type Certificate struct {
	Record, Number string
	On, Due        forms.Day // NoDay where it does not say
	Out            bool      // found out of tolerance
	Errors         map[string]forms.FoundError
	File, FileName string // SHA-256 and name of the certificate's file
	By             string
	At             time.Time
	clock          uint64
}

// Proof is one trial of an instrument on a known outlet.
type Proof struct {
	Record, By, Tag, Where string
	On                     forms.Day
	Works                  bool
	At                     time.Time
}

// InstrumentPast is what was recorded of an instrument beside its fields, the newest first.
type InstrumentPast struct {
	Certificates []Certificate
	Proofs       []Proof
}

// InstrumentPast reads an instrument's certificates and proofs.
func (v *View) InstrumentPast(instrument string) (InstrumentPast, error) {
	out := InstrumentPast{}
	org := v.orgLog()
	id := parseID(instrument)
	row := v.tx.Bucket(bktThing).Get(thingKey(id, org, ofInstrument))
	if org == 0 || len(row) != 4 || !v.scope.mayRead(record.Org) {
		return out, nil
	}
	for u := (unpacker{b: v.tx.Bucket(bktFact).Get(workKey(org, read32(row)))}); len(u.b) > 0; {
		seq := u.uint()
		if u.bad {
			return out, errPacked
		}
		r, st, _, err := readBook(v.tx, seq)
		if err != nil {
			return out, err
		}
		if r.Kind == "instrument.proved" {
			out.Proofs = append(out.Proofs, proofOf(r, st))
			continue
		}
		c, err := certificateOf(r, st)
		if err != nil {
			return out, err
		}
		out.Certificates = append(out.Certificates, c)
	}
	slices.SortFunc(out.Certificates, func(a, b Certificate) int {
		return cmp.Or(cmp.Compare(b.On, a.On), cmp.Compare(b.clock, a.clock), cmp.Compare(b.Record, a.Record))
	})
	slices.SortFunc(out.Proofs, func(a, b Proof) int { return cmp.Or(b.At.Compare(a.At), cmp.Compare(b.Record, a.Record)) })
	return out, nil
}

func certificateOf(r *record.Record, st record.Stamp) (Certificate, error) {
	body, err := readCalibrated(r)
	if err != nil {
		return Certificate{}, err
	}
	c := Certificate{Record: r.ID, Number: body.Certificate, On: forms.NoDay, Due: forms.NoDay, Out: body.Out, Errors: body.Errors, File: body.File, FileName: body.FileName,
		By: r.By, At: happened(r, st), clock: r.Clock}
	if d, err := forms.ParseDay(body.On); err == nil {
		c.On = d
	}
	if d, err := forms.ParseDay(body.Due); err == nil {
		c.Due = d
	}
	return c, nil
}

func proofOf(r *record.Record, st record.Stamp) Proof {
	var body struct {
		On, Tag, Where string
		Works          *bool
	}
	p := Proof{Record: r.ID, By: r.By, On: forms.NoDay, At: happened(r, st), Works: true}
	if json.Unmarshal(r.Body, &body) != nil {
		return p
	}
	p.Tag, p.Where, p.Works = body.Tag, body.Where, body.Works == nil || *body.Works
	if d, err := forms.ParseDay(body.On); err == nil {
		p.On = d
	}
	return p
}

// Doubted is the time in which what an instrument measured is in doubt: from the day of its last good certificate to the
// day it was found out of tolerance. From is NoDay where it has no good certificate.
type Doubted struct {
	From, To    forms.Day
	Certificate Certificate
}

// Doubted gives the times that an instrument's certificates put in doubt, the newest first.
func (p *InstrumentPast) Doubted() []Doubted {
	var out []Doubted
	for i, c := range p.Certificates {
		if !c.Out {
			continue
		}
		d := Doubted{From: forms.NoDay, To: c.On, Certificate: c}
		for _, earlier := range p.Certificates[i+1:] {
			if !earlier.Out && earlier.On < c.On {
				d.From = earlier.On
				break
			}
		}
		out = append(out, d)
	}
	return out
}

// Holds reports whether a test day lies in the time in doubt. The day of the good certificate is out of doubt, the day on
// which the fault was found is not.
func (d *Doubted) Holds(day forms.Day) bool {
	return (d.From == forms.NoDay || day > d.From) && day <= d.To
}

// Bounds of a certificate's file.
const FileBytes = 4 << 20

var errNoFile = &Error{Code: "not_found", Field: "file", Text: "This file has not arrived here, or the certificate does not name it."}

// fileKind tells what a certificate's file is by its first bytes.
func fileKind(raw []byte) string {
	switch {
	case bytes.HasPrefix(raw, []byte("%PDF-")):
		return "application/pdf"
	case bytes.HasPrefix(raw, []byte("\xff\xd8\xff")):
		return "image/jpeg"
	}
	return ""
}

// CheckFile refuses what is no PDF or JPEG of at most FileBytes.
func CheckFile(raw []byte) error {
	switch {
	case len(raw) > FileBytes:
		return &Error{Code: "too_large", Field: "file", Text: "This file is larger than 4 MiB. Scan the certificate with a lower resolution, or keep its first page."}
	case fileKind(raw) == "":
		return &Error{Code: "invalid", Field: "file", Text: "This is no PDF or JPEG file. Choose the certificate as PDF, or a scan of it as JPEG."}
	}
	return nil
}

// KeepFile keeps the bytes of a certificate's file beside the book, where the certificate names them. The same again
// changes nothing.
func (s *Store) KeepFile(sc Scope, certificate string, raw []byte) error {
	if err := CheckFile(raw); err != nil {
		return err
	}
	sum := sha256.Sum256(raw)
	name := hex.EncodeToString(sum[:])
	err := s.View(sc, func(v *View) error {
		c, err := v.certificate(certificate)
		if err == nil && c.File != name {
			err = errNoFile
		}
		return err
	})
	if err != nil {
		return err
	}
	path := s.photoPath(name)
	if _, err := os.Stat(path); err == nil {
		return nil
	}
	if err := os.MkdirAll(filepath.Dir(path), 0o700); err != nil {
		return fmt.Errorf("keep file: %w", err)
	}
	return writeWhole(path, raw)
}

// certificate reads one by its record.
func (v *View) certificate(id string) (Certificate, error) {
	r, st, _, _, err := v.recordAt(parseID(id))
	if err == nil && r.Kind != "instrument.calibrated" {
		err = errNoFile
	}
	if err != nil {
		return Certificate{}, err
	}
	return certificateOf(r, st)
}

// CertificateFile gives the bytes of a certificate's file through its record, their kind and the name it had.
func (v *View) CertificateFile(certificate string) (raw []byte, kind, name string, err error) {
	c, err := v.certificate(certificate)
	if err != nil {
		return nil, "", "", err
	}
	if !isHash(c.File) {
		return nil, "", "", errNoFile
	}
	raw, err = os.ReadFile(v.s.photoPath(c.File))
	if errors.Is(err, fs.ErrNotExist) {
		return nil, "", "", errNoFile
	}
	if err != nil {
		return nil, "", "", fmt.Errorf("file of certificate %s: %w", certificate, err)
	}
	if sum := sha256.Sum256(raw); hex.EncodeToString(sum[:]) != c.File || fileKind(raw) == "" {
		return nil, "", "", &Error{Code: "conflict", Field: "file", Text: "The file of this certificate is damaged on the server's disk. Put it back from a backup."}
	}
	return raw, fileKind(raw), c.FileName, nil
}
