package store

import (
	"cmp"
	"slices"
	"strings"
	"sync"

	"github.com/go-json-experiment/json"

	"tripwell/forms"
)

// rules are the forms, limit sets and plans of the book, read when first needed. site and org are numbers of logs.
type rules struct {
	list      func(prefix []byte) []row
	plans     map[uint32][]*forms.Plan
	schedules map[scheduleID]forms.Schedule
	limits    map[limitID][]*forms.LimitSet
	standers  map[uint32][]string // ids of a log's sets that stand for kinds
	forms     map[string][]*forms.Form
	whole     map[uint32]*saidOfWholeSite
	said      func(bucket, prefix []byte) []row // m_occ and m_pause; nil where dates are not asked for
	known     *verdicts                         // verdict worked out beforehand for the entry being judged
}

type scheduleID struct {
	site uint32
	kind string
}

type limitID struct {
	log uint32
	set string
}

func newRules(list func(prefix []byte) []row) *rules {
	ru := &rules{list: list}
	ru.forget()
	return ru
}

// forget makes the rules be read again.
func (ru *rules) forget() {
	ru.plans, ru.schedules = map[uint32][]*forms.Plan{}, map[scheduleID]forms.Schedule{}
	ru.limits, ru.forms = map[limitID][]*forms.LimitSet{}, map[string][]*forms.Form{}
	ru.standers, ru.whole = map[uint32][]string{}, map[uint32]*saidOfWholeSite{}
}

// parsedRules keeps what rows of rules say, by their bytes: a group commit every millisecond must not read the shipped
// tables again. It holds every revision the process has met and nothing else.
var parsedRules sync.Map

// parseRule reads the JSON of a rule row.
func parseRule[T any](value []byte) (*T, error) {
	raw := ruleJSON(value)
	if v, ok := parsedRules.Load(string(raw)); ok {
		if t, ok := v.(*T); ok {
			return t, nil
		}
	}
	t := new(T)
	if err := json.Unmarshal(raw, t); err != nil {
		return nil, err
	}
	parsedRules.Store(string(raw), t)
	return t, nil
}

// ruleJSON is a rule row without the stamp in front of it.
func ruleJSON(value []byte) []byte { return value[min(24, len(value)):] }

func rulesUnder[T any](ru *rules, prefix []byte) []*T {
	var out []*T
	for _, r := range ru.list(prefix) {
		if t, err := parseRule[T](r.value); err == nil { // checked when it was folded
			out = append(out, t)
		}
	}
	return out
}

func rulePrefix(typ byte, site uint32, name string) []byte {
	key := ruleKey(typ, site, name, 0)
	if name == "" {
		return key[:5]
	}
	return key[:len(key)-4]
}

func (ru *rules) plansOf(site uint32) []*forms.Plan {
	if site == 0 {
		return nil
	}
	p, ok := ru.plans[site]
	if !ok {
		p = rulesUnder[forms.Plan](ru, rulePrefix(rulePlan, site, ""))
		ru.plans[site] = p
	}
	return p
}

// schedule gives what is asked of a kind at a site.
func (ru *rules) schedule(site, org uint32, kind string) forms.Schedule {
	key := scheduleID{site, kind}
	s, ok := ru.schedules[key]
	if !ok {
		s = forms.ScheduleOf(kind, ru.plansOf(org), ru.plansOf(site))
		ru.schedules[key] = s
	}
	return s
}

// limitRevisions gives the revisions of a set in one log, by day in force.
func (ru *rules) limitRevisions(log uint32, set string) []*forms.LimitSet {
	key := limitID{log, set}
	revs, ok := ru.limits[key]
	if ok || log == 0 {
		return revs
	}
	revs = rulesUnder[forms.LimitSet](ru, rulePrefix(ruleLimit, log, set))
	slices.SortFunc(revs, func(a, b *forms.LimitSet) int {
		return cmp.Or(cmp.Compare(a.InForce, b.InForce), cmp.Compare(a.Revision, b.Revision))
	})
	ru.limits[key] = revs
	return revs
}

// limitSet gives the revision in force on a day: the site's own where it has one, else the organisation's, nil where
// there was none.
func (ru *rules) limitSet(site, org uint32, set string, on forms.Day) *forms.LimitSet {
	for _, log := range []uint32{site, org} {
		if in := ru.revisionOn(log, set, on); in != nil {
			return in
		}
	}
	return nil
}

// revisionOn gives the revision of a log's set in force on a day, nil where there was none.
func (ru *rules) revisionOn(log uint32, set string, on forms.Day) (in *forms.LimitSet) {
	for _, rev := range ru.limitRevisions(log, set) {
		if rev.InForce <= on {
			in = rev
		}
	}
	return in
}

// form gives the revision an entry was made with, or else the one in force on its day, or the first there is.
func (ru *rules) form(org uint32, id string, revision int, on forms.Day) *forms.Form {
	revs, ok := ru.forms[id]
	if !ok {
		if org != 0 {
			revs = rulesUnder[forms.Form](ru, rulePrefix(ruleForm, org, id))
		}
		ru.forms[id] = revs
	}
	var in *forms.Form
	for _, f := range revs { // by revision
		if f.Revision == revision {
			return f
		}
		if in == nil || f.InForce <= on {
			in = f
		}
	}
	return in
}

// judged is an entry's verdict and the limit revision it was given under; set is "" where none was in force.
type judged struct {
	forms.Verdict
	set string
	rev int
}

// judge gives the verdict of an entry tested on a day. What nothing can be said of is incomplete: a form or a limit set
// the book does not hold, or a rule of decision this program does not know. Not measured is never a pass.
func (ru *rules) judge(site, org uint32, e *forms.Entry, on forms.Day) judged {
	j := judged{Verdict: forms.Verdict{Result: forms.Incomplete}}
	form, set, name := ru.standing(site, org, e, on)
	if form == nil || set == nil {
		return j
	}
	j.set, j.rev = name, set.Revision
	if v, ok := ru.known.knows(form, set); ok {
		j.Verdict = v
	} else if v, err := forms.Judge(form, set, *e); err == nil {
		j.Verdict = v
		ru.known.note(form, set, v)
	}
	return j
}

// standing gives the form and the limit set an entry of a day is judged by, nil where the book holds none.
func (ru *rules) standing(site, org uint32, e *forms.Entry, on forms.Day) (form *forms.Form, set *forms.LimitSet, name string) {
	form = ru.form(org, e.Form, e.Given.FormRev, on)
	if form == nil {
		return nil, nil, ""
	}
	if name = e.Given.LimitSet; name == "" {
		name, _ = ru.setOfKind(site, org, entryKind(e), e.Given.Delayed, on)
	}
	if name == "" {
		name = form.LimitSet
	}
	return form, ru.limitSet(site, org, name, on), name
}

// Why a limit set applies to a device, the strongest reason first.
const (
	ByDevice       = "device"       // chosen for the device itself
	BySite         = "site"         // stands for its kind at the site
	ByOrganisation = "organisation" // stands for its kind in the organisation
	ByShipped      = "shipped"      // what the program ships for its kind
)

// setOfKind names the limit set of a kind on a day, for devices none is chosen for, and why it applies.
func (ru *rules) setOfKind(site, org uint32, kind string, delayed bool, on forms.Day) (name, why string) {
	for _, log := range []struct {
		ord uint32
		why string
	}{{site, BySite}, {org, ByOrganisation}} {
		var in []*forms.LimitSet
		for _, id := range ru.standersOf(log.ord) {
			if s := ru.revisionOn(log.ord, id, on); s != nil {
				in = append(in, s)
			}
		}
		if name := forms.StandingFor(in, kind, delayed); name != "" {
			return name, log.why
		}
	}
	return forms.DefaultLimitSet(kind, delayed), ByShipped
}

// standersOf lists the sets of a log any revision of which stands for kinds.
func (ru *rules) standersOf(log uint32) []string {
	ids, ok := ru.standers[log]
	if ok || log == 0 {
		return ids
	}
	for _, s := range rulesUnder[forms.LimitSet](ru, rulePrefix(ruleLimit, log, "")) {
		if len(s.StandsFor) > 0 && !slices.Contains(ids, s.ID) {
			ids = append(ids, s.ID)
		}
	}
	ru.standers[log] = ids
	return ids
}

func entryKind(e *forms.Entry) string {
	if e.Given.Kind != "" {
		return e.Given.Kind
	}
	kind, _, _ := strings.Cut(e.Form, "/")
	return kind
}

func entryTask(e *forms.Entry) string {
	_, task, _ := strings.Cut(e.Form, "/")
	return task
}

// Forms gives the newest revision of each form, by id.
func (v *View) Forms() ([]*forms.Form, error) {
	return newest(rulesUnder[forms.Form](v.rules(), rulePrefix(ruleForm, v.orgLog(), "")), func(f *forms.Form) string { return f.ID }), nil
}

// LimitSets gives every revision of the organisation's limit sets, by id then revision.
func (v *View) LimitSets() ([]*forms.LimitSet, error) {
	return rulesUnder[forms.LimitSet](v.rules(), rulePrefix(ruleLimit, v.orgLog(), "")), nil
}

// SiteLimitSets gives every revision of the limit sets a site has of its own; they stand before the organisation's.
func (v *View) SiteLimitSets(site string) ([]*forms.LimitSet, error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return nil, err
	}
	return rulesUnder[forms.LimitSet](v.rules(), rulePrefix(ruleLimit, sv.ord, "")), nil
}

// Plans gives the newest revision of each of the organisation's plans, by id.
func (v *View) Plans() ([]*forms.Plan, error) {
	return newest(v.rules().plansOf(v.orgLog()), func(p *forms.Plan) string { return p.ID }), nil
}

// SitePlans gives the newest revision of each plan a site has of its own.
func (v *View) SitePlans(site string) ([]*forms.Plan, error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return nil, err
	}
	return newest(v.rules().plansOf(sv.ord), func(p *forms.Plan) string { return p.ID }), nil
}

// newest keeps the last of each id of a list in the order of (id, revision).
func newest[T any](list []*T, id func(*T) string) []*T {
	out := []*T{}
	for i, t := range list {
		if i+1 == len(list) || id(list[i+1]) != id(t) {
			out = append(out, t)
		}
	}
	return out
}
