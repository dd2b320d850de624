package store

import (
	"cmp"
	"fmt"
	"slices"
	"time"

	"github.com/go-json-experiment/json"
	"github.com/go-json-experiment/json/jsontext"
	"go.etcd.io/bbolt"

	"tripwell/forms"
	"tripwell/store/record"
)

// entryBody is the body of entry.made and entry.imported.
type entryBody struct {
	forms.Entry
	Shown   *Shown     `json:"shown"`
	Source  string     `json:"source"`
	ReadBy  string     `json:"read_by"`
	TypedBy string     `json:"typed_by"`
	Note    string     `json:"note"`
	Day     *forms.Day `json:"day"`
	Result  string     `json:"result"`

	figures  []figure // the measured values among the readings
	verdicts verdicts // of all entries that share this body
}

// checked spares looking for doubled names and damaged text again: the body is part of a record, whose reading has
// refused both.
var checked = json.JoinOptions(jsontext.AllowDuplicateNames(true), jsontext.AllowInvalidUTF8(true))

// readEntry reads an entry; its fault names what cannot be understood.
func readEntry(r *record.Record) (*entryBody, error) {
	if b, ok := r.Read.(*entryBody); ok {
		return b, nil
	}
	b := new(entryBody)
	if err := json.Unmarshal(r.Body, b, checked); err != nil {
		return nil, badBody("", "The entry cannot be read: %v.", err)
	}
	if r.Kind == "entry.imported" && b.Readings == nil && resultCode(b.Result) == 0 && r.Sealed == "" {
		return nil, badBody("result", "The result %q is none: an imported entry has one of %v.", b.Result, forms.Results())
	}
	b.figures = figures(b.Readings)
	return b, nil
}

// readAhead decodes the body of an entry before the writer sees it, on whatever processor is free. What cannot be read is
// left to the fold, which says why.
func readAhead(r *record.Record) {
	if r.Kind != "entry.made" && r.Kind != "entry.imported" {
		return
	}
	if b, err := readEntry(r); err == nil {
		r.Read = b
	}
}

// correctionBody is the body of entry.corrected; withdrawals and seals have the reason alone.
type correctionBody struct {
	Readings map[string]forms.Reading `json:"readings"`
	Series   []forms.SeriesReading    `json:"series"`
	Given    *forms.Given             `json:"given"`
	Reason   string                   `json:"reason"`
}

func readCorrection(r *record.Record) (*correctionBody, error) {
	b := new(correctionBody)
	if err := json.Unmarshal(r.Body, b); err != nil {
		return nil, badBody("", "The correction cannot be read: %v.", err)
	}
	return b, nil
}

// saidRecord is a later record about an entry.
type saidRecord struct {
	*record.Record
	stamp record.Stamp
	body  *correctionBody
	idle  bool // its author might not change this entry: it is shown and not in force
}

// readSaid reads a row of m_said. Of the record that is being folded the book has nothing yet: current stands in for it. Whether
// each is in force is asked of the grants.
func readSaid(tx *bbolt.Tx, row []byte, current *saidRecord, entry *record.Record, gr *grants) ([]saidRecord, error) {
	var list []saidRecord
	for u := (unpacker{b: row}); len(u.b) > 0; {
		seq := u.uint()
		if u.bad {
			return nil, errPacked
		}
		var s saidRecord
		if current != nil {
			s = *current
		}
		if tx.Bucket(bktRec).Get(key64(seq)) != nil {
			var err error
			if s.Record, s.stamp, _, err = readBook(tx, seq); err != nil {
				return nil, err
			}
		}
		if s.Record == nil {
			return nil, errPacked
		}
		var err error
		if s.body, err = readCorrection(s.Record); err != nil {
			return nil, err
		}
		may, err := gr.mayChange(entry, &s)
		if err != nil {
			return nil, err
		}
		s.idle = !may
		list = append(list, s)
	}
	slices.SortFunc(list, func(a, b saidRecord) int { return cmp.Or(cmp.Compare(a.Clock, b.Clock), cmp.Compare(a.ID, b.ID)) })
	return list, nil
}

// readBook reads one record of the book by its place. Nothing of it may outlive the transaction.
func readBook(tx *bbolt.Tx, seq uint64) (*record.Record, record.Stamp, kept, error) {
	k, err := readRec(tx.Bucket(bktRec).Get(key64(seq)))
	if err != nil {
		return nil, record.Stamp{}, k, fmt.Errorf("record at %d: %w", seq, err)
	}
	r, fault := record.Reread(k.raw)
	if fault != nil {
		return nil, record.Stamp{}, k, fmt.Errorf("record at %d: %w", seq, fault)
	}
	st, err := record.ParseStamp(k.stamp)
	if err != nil {
		return nil, st, k, fmt.Errorf("record at %d: %w", seq, err)
	}
	return r, st, k, nil
}

// outcome is what an entry comes to after everything said of it.
type outcome struct {
	day       forms.Day
	task      string
	entry     forms.Entry
	judged    judged
	came      forms.Day   // received by this store
	said      bool        // anything was said of it since
	withdrawn *saidRecord // the first of several by (clock, id)
	sealed    bool
}

// outcome weighs an entry: of those in force the correction with the largest (clock, id) gives the readings, the last that
// states what was given gives that; a withdrawal ends it; a sealed entry never counts as passed, and a sealed correction corrects nothing. The order of arrival has no say.
func (ru *rules) outcome(site, org uint32, zone *time.Location, r *record.Record, st record.Stamp, body *entryBody, said []saidRecord) outcome {
	o := outcome{day: testDay(r, st, body, zone), task: entryTask(&body.Entry), entry: body.Entry, came: forms.DayOf(st.Received.In(zone)), said: len(said) > 0, sealed: r.Sealed != ""}
	o.entry = corrected(body.Entry, said)
	for i := range said {
		switch s := &said[i]; s.Kind {
		case "entry.withdrawn":
			if o.withdrawn == nil && !s.idle {
				o.withdrawn = s
			}
		case "record.sealed":
			o.sealed = true
		}
	}
	switch {
	case o.sealed: // what it was judged by went with its bytes
		o.judged.Result = forms.Incomplete
	case r.Kind == "entry.imported" && o.entry.Readings == nil:
		o.judged.Result = body.Result
	default:
		o.judged = ru.judge(site, org, &o.entry, o.day)
	}
	return o
}

// testDay is the day an entry was tested on: of its own time, never later than the first holder had it; an imported one may
// name an earlier day.
func testDay(r *record.Record, st record.Stamp, body *entryBody, zone *time.Location) forms.Day {
	day := forms.DayOf(happened(r, st).In(zone))
	if body.Day != nil && *body.Day != forms.NoDay && *body.Day < day && r.Kind == "entry.imported" {
		day = *body.Day
	}
	return day
}

// corrected is an entry after its corrections in force, which come oldest first: the last gives the readings, the last that states
// what was given gives that.
func corrected(e forms.Entry, said []saidRecord) forms.Entry {
	for _, s := range said {
		if s.Kind != "entry.corrected" || s.idle || s.Sealed != "" {
			continue
		}
		e.Readings, e.Series = s.body.Readings, s.body.Series
		if s.body.Given != nil {
			e.Given = *s.body.Given
		}
	}
	return e
}

// past is the outcome as the history keeps it.
func (o *outcome) past(seq uint64) past {
	p := past{seq: seq, day: o.day, task: o.task, came: o.came, said: o.said}
	if o.withdrawn == nil {
		p.locked = o.judged.Result == forms.NotTested && forms.Locked(o.entry.Readings)
		p.result = resultCode(o.judged.Result)
		p.met = forms.Meets(o.task, o.judged.Result, o.entry.Readings)
		if one := metOne[o.task]; len(p.met) == 1 && one != nil {
			p.met = one
		}
	}
	return p
}
