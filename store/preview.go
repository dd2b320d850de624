package store

import (
	"cmp"
	"context"
	"slices"

	"go.etcd.io/bbolt"

	"tripwell/forms"
)

// Preview is what a revision would change about the entries there are.
type Preview struct {
	Looked  int  // entries of days the revision would be in force on
	Judged  int  // of these, entries it would judge
	Changed int  // of these, entries that would get another result
	Whole   bool // every entry was looked at; else the time was up
	Changes []ResultChange
	First   []PreviewEntry // the first that would change, site by site and by test day
}

// ResultChange counts the entries whose result would go from one to another.
type ResultChange struct {
	Was, Becomes string
	N            int
}

// PreviewEntry is one entry that would get another result.
type PreviewEntry struct {
	Entry, Device, Site, Task string
	Day                       forms.Day
	Was, Becomes              string
}

// previewFirst is how many entries a preview names.
const previewFirst = 50

// Preview judges the entries of a draft's days twice, as things stand and as they would, and says where the two differ.
// Where ctx ends before all are looked at it gives what was found until then.
func (v *View) Preview(ctx context.Context, drafts ...RuleDraft) (Preview, error) {
	p := Preview{Whole: true, Changes: []ResultChange{}, First: []PreviewEntry{}}
	o := overlay{bucket: v.tx.Bucket(bktRule), changed: map[string][]byte{}}
	from, scope := forms.Day(1<<30), ""
	for i, d := range drafts {
		_, id, revision, inForce, err := d.read()
		if err != nil {
			return p, err
		}
		ord, typ := v.orgLog(), byte(ruleLimit)
		if d.Site != "" {
			sv, err := v.siteNamed(d.Site)
			if err != nil {
				return p, err
			}
			ord = sv.ord
		}
		if i == 0 {
			scope = d.Site
		} else if scope != d.Site {
			scope = ""
		}
		if d.Kind == "forms.set" {
			typ = ruleForm
		}
		raw, err := encodeBody(d.JSON)
		if err != nil {
			return p, err
		}
		o.put(ruleKey(typ, ord, id, revision), append(make([]byte, 24), raw...))
		from = min(from, inForce)
	}
	then := newRules(o.list)
	sites, err := v.previewSites(scope)
	if err != nil {
		return p, err
	}
	for _, site := range sites {
		if err := v.previewSite(ctx, site, from, then, &p); err != nil || !p.Whole {
			return p, err
		}
	}
	return p, nil
}

func (v *View) previewSites(scope string) ([]string, error) {
	if scope != "" {
		return []string{scope}, nil
	}
	all, err := v.Sites()
	ids := make([]string, len(all))
	for i := range all {
		ids[i] = all[i].ID
	}
	return ids, err
}

func (v *View) previewSite(ctx context.Context, site string, from forms.Day, then *rules, p *Preview) error {
	sv, list, err := v.siteHistory(site, from, forms.NoDay)
	if err != nil {
		return err
	}
	for i, one := range list {
		if i%256 == 0 && ctx.Err() != nil {
			p.Whole = false
			return nil
		}
		if err := v.previewEntry(sv, one.seq, then, p); err != nil {
			return err
		}
	}
	return nil
}

func (v *View) previewEntry(sv *siteView, seq uint64, then *rules, p *Preview) error {
	r, st, _, err := readBook(v.tx, seq)
	if err != nil {
		return err
	}
	body, err := readEntry(r)
	if err != nil {
		return err
	}
	p.Looked++
	if r.Kind == "entry.imported" && body.Readings == nil {
		return nil
	}
	said, err := readSaid(v.tx, v.tx.Bucket(bktSaid).Get(saidKey(sv.ord, parseID(r.ID))), nil, r, v.whoMay())
	if err != nil {
		return err
	}
	e, day := corrected(body.Entry, said), testDay(r, st, body, sv.zone)
	formNow, setNow, _ := v.rules().standing(sv.ord, v.orgLog(), &e, day)
	formThen, setThen, _ := then.standing(sv.ord, v.orgLog(), &e, day)
	if formNow == formThen && setNow == setThen { // equal bytes are parsed once
		return nil
	}
	p.Judged++
	for _, s := range said {
		if !s.idle && (s.Kind == "entry.withdrawn" || s.Kind == "record.sealed") {
			return nil
		}
	}
	was, becomes := v.rules().judge(sv.ord, v.orgLog(), &e, day).Result, then.judge(sv.ord, v.orgLog(), &e, day).Result
	if was == becomes {
		return nil
	}
	p.Changed++
	p.count(was, becomes)
	if len(p.First) < previewFirst {
		p.First = append(p.First, PreviewEntry{Entry: r.ID, Device: r.Subject, Site: sv.ID, Task: entryTask(&e), Day: day, Was: was, Becomes: becomes})
	}
	return nil
}

func (p *Preview) count(was, becomes string) {
	for i := range p.Changes {
		if c := &p.Changes[i]; c.Was == was && c.Becomes == becomes {
			c.N++
			return
		}
	}
	p.Changes = append(p.Changes, ResultChange{was, becomes, 1})
}

// Judgement is the result an entry had under the revisions the book held at one time.
type Judgement struct {
	Result   string
	LimitSet string
	LimitRev int
	Revision *Revision // the revision that changed it; nil for the first, which the entry met when it was received
}

// Judgements gives every result an entry has had by the rules alone, the first first: as it was judged when it came, and
// after each later revision that judged it otherwise. Corrections are no judgements: all are of the entry as it stands.
func (v *View) Judgements(e Entry) ([]Judgement, error) {
	sv, err := v.open(e.Site)
	if err != nil {
		return nil, err
	}
	came, ok := v.seqOf(parseID(e.ID))
	if !ok {
		return nil, errNoEntry
	}
	if e.Imported && e.Body.Readings == nil {
		return nil, nil
	}
	later, err := v.revisionsAfter(sv, came)
	if err != nil {
		return nil, err
	}
	body := e.Body
	judgedAt := func(seq uint64, by *Revision) Judgement {
		j := v.rulesAt(seq).judge(sv.ord, v.orgLog(), &body, e.Day)
		return Judgement{j.Result, j.set, j.rev, by}
	}
	out := []Judgement{judgedAt(came, nil)}
	for i := range later {
		j, last := judgedAt(later[i].seq, &later[i]), out[len(out)-1]
		if j.Result != last.Result || j.LimitSet != last.LimitSet || j.LimitRev != last.LimitRev {
			out = append(out, j)
		}
	}
	return out, nil
}

// JudgedAs gives the verdict an entry would have with other readings: as first entered, or after one of its corrections.
func (v *View) JudgedAs(e Entry, body forms.Entry) (forms.Verdict, error) {
	sv, err := v.open(e.Site)
	if err != nil {
		return forms.Verdict{}, err
	}
	return v.rules().judge(sv.ord, v.orgLog(), &body, e.Day).Verdict, nil
}

// revisionsAfter gives the revisions that came after a place in the book, in the order of the book.
func (v *View) revisionsAfter(sv *siteView, seq uint64) ([]Revision, error) {
	var all []Revision
	for _, of := range []struct {
		kind string
		typ  byte
		ord  uint32
		site string
	}{{"limits.set", ruleLimit, v.orgLog(), ""}, {"limits.set", ruleLimit, sv.ord, sv.ID}, {"forms.set", ruleForm, v.orgLog(), ""}} {
		list, err := v.revisions(of.kind, of.typ, of.ord, of.site, "")
		if err != nil {
			return nil, err
		}
		all = append(all, list...)
	}
	all = slices.DeleteFunc(all, func(r Revision) bool { return r.seq <= seq })
	slices.SortFunc(all, func(a, b Revision) int { return cmp.Compare(a.seq, b.seq) })
	return all, nil
}

// rulesAt gives the rules as the book held them at a place in it.
func (v *View) rulesAt(seq uint64) *rules {
	o := overlay{bucket: v.tx.Bucket(bktRule)}
	return newRules(func(prefix []byte) []row { return heldAt(v.tx, o.list(prefix), seq) })
}

// heldAt keeps the rows of rules whose records stand no later in the book.
func heldAt(tx *bbolt.Tx, rows []row, seq uint64) []row {
	ids := tx.Bucket(bktID)
	kept := rows[:0]
	for _, r := range rows {
		if len(r.value) < 24 {
			continue
		}
		if at := ids.Get(r.value[8:24]); at != nil && readKey64(at) <= seq {
			kept = append(kept, r)
		}
	}
	return kept
}
