package store

import (
	"bytes"
	"cmp"
	"encoding/json"

	"tripwell/forms"
	"tripwell/store/record"
)

// calibratedBody is the body of instrument.calibrated. Errors holds, by reading code, by how much the instrument was
// found to read too high; Out says that this was beyond what it may be.
type calibratedBody struct {
	On          string                      `json:"on"`
	Due         string                      `json:"due"`
	Certificate string                      `json:"certificate"`
	Out         bool                        `json:"out"`
	Errors      map[string]forms.FoundError `json:"errors"`
	File        string                      `json:"file"`
	FileName    string                      `json:"file_name"`
}

func readCalibrated(r *record.Record) (*calibratedBody, error) {
	b := new(calibratedBody)
	if err := json.Unmarshal(r.Body, b); err != nil {
		return nil, badBody("errors", "What the certificate says is not readable: %v.", err)
	}
	return b, nil
}

// calibrated keeps a certificate, and says the field calibration_due of its instrument: one found out of tolerance
// without a new date is not to be used from that day on.
func (f *fold) calibrated(r *record.Record) error {
	body, err := readCalibrated(r)
	if err != nil {
		return err
	}
	reg, err := f.instrumentSaid(r)
	if err != nil {
		return err
	}
	due := body.Due
	if body.Out {
		due = cmp.Or(due, body.On)
	}
	for name, v := range map[string]string{"calibration_due": due, "calibrated": body.On, "certificate": body.Certificate} {
		if v != "" {
			reg.say(name, record.Said{Value: quoted(v), Clock: r.Clock, ID: r.ID, From: r.From})
		}
	}
	if r.Sealed != "" { // the number of an earlier certificate is not that of this one
		reg.say("certificate", record.Said{Value: json.RawMessage("null"), Clock: r.Clock, ID: r.ID, From: r.From})
	}
	return nil
}

// instrumentProved keeps that an instrument was tried on a known outlet.
func (f *fold) instrumentProved(r *record.Record) error {
	_, err := f.instrumentSaid(r)
	return err
}

// instrumentSaid keeps a record among those of its instrument.
func (f *fold) instrumentSaid(r *record.Record) (*register, error) {
	l, err := f.log(r.Log)
	if err != nil {
		return nil, err
	}
	key, reg, err := f.register(l, ofInstrument, parseID(r.Subject))
	if err != nil {
		return nil, err
	}
	row := workKey(l.ord, key.n)
	p := packer{bytes.Clone(f.on(bktFact).get(row))}
	p.uint(f.seq)
	f.on(bktFact).put(row, p.b)
	return reg, nil
}
