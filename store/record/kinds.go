package record

import (
	"slices"
	"strings"
)

// kindTable names every kind there is, the logs it may stand in (site, org, office; any = all three) and the members of
// its body: NAME:TYPE, ! where the member must be there. Members it does not name are kept and ignored; an optional
// member that is null is as good as absent. static/record.mjs carries the same lines.
const kindTable = `
site.registered        site      set:set!
site.set               site      set:set! seen:stamp
place.registered       site      set:set! seen:stamp
place.set              site      set:set! seen:stamp
panel.set              site      set:set! seen:stamp
circuit.set            site      set:set! seen:stamp
device.registered      site      set:set! seen:stamp
device.set             site      set:set! seen:stamp
device.retired         site      reason:text! on:day
device.replaced        site      with:id! reason:text on:day
tag.bound              site      tag:tag!
tag.freed              site      tag:tag!
entry.made             site      form:form! readings:readings! series:series given:object shown:object source:text read_by:text typed_by:text note:text photos:list round:id
entry.imported         site      form:form! readings:readings series:series given:object shown:object day:day result:text source:text read_by:text typed_by:text note:text photos:list
entry.corrected        site      entry:id! readings:readings! series:series given:object reason:text!
entry.withdrawn        site      entry:id! reason:text!
round.made             site      set:set! seen:stamp
round.set              site      set:set! seen:stamp
round.closed           site      day:day! done:number left:number skipped:number back:number proved:object instrument:text passed:list
round.accepted         site      note:text
defect.opened          site      device:id! text:text! cause:text severity:text protector:id due:day parts:list photos:list
defect.noted           site      device:id! text:text severity:text due:day parts:list photos:list
defect.made_safe       site      device:id! how:text! photos:list
defect.assigned        site      device:id! to:id crew:text due:day parts:list
defect.repaired        site      device:id! how:text! parts:list photos:list
defect.closed          site      device:id! reason:text
defect.reopened        site      device:id! reason:text!
occasion.noted         site      cause:text! on:day! devices:ids tasks:list text:text
pause.set              site      from:day! until:day! devices:ids reason:text!
record.refused         any       id:text sha256:hash! from:text n:number code:text!
record.admitted        any       reason:text!
record.sealed          any       reason:text!
forms.set              org       form:object! reason:text
limits.set             org,site  limits:object! reason:text
plan.set               org,site  plan:object! reason:text
usual.set              org,site  usual:object! reason:text
instrument.set         org       set:wide! seen:stamp
instrument.calibrated  org       on:day! due:day certificate:text out:bool errors:object file:hash file_name:text
instrument.proved      org       on:day! tag:tag works:bool where:text
person.set             org       role:role! active:bool!
tags.minted            org       tags:tags!
grant.set              office    role:role! all:bool! sites:ids active:bool! from:day to:day until:day may:list
signed.in              office
export.taken           office    what:text! site:text from:text to:text
access.used            office    on:day! what:text! site:id
installation.enrolled  office    installation:id!
installation.revoked   office    installation:id!
book.restored          office    epoch:number! logs:list
`

type kind struct {
	logs []string
	body []bodyMember
}

type bodyMember struct {
	name, shape string
	must        bool
}

var kinds = readKinds(kindTable)

func readKinds(table string) map[string]kind {
	m := map[string]kind{}
	for line := range strings.Lines(table) {
		f := strings.Fields(line)
		if len(f) == 0 {
			continue
		}
		k := kind{logs: strings.Split(f[1], ",")}
		for _, b := range f[2:] {
			name, shape, _ := strings.Cut(b, ":")
			k.body = append(k.body, bodyMember{name, strings.TrimSuffix(shape, "!"), strings.HasSuffix(shape, "!")})
		}
		m[f[0]] = k
	}
	return m
}

// Kinds lists the kinds there are, sorted.
func Kinds() []string {
	var all []string
	for k := range kinds {
		all = append(all, k)
	}
	slices.Sort(all)
	return all
}

// LogClass is site, org or office.
func LogClass(log string) string {
	if log == Org || log == Office {
		return log
	}
	return "site"
}

// check holds what a kind asks of a record by itself: version, log, body.
func (r *Record) check() *Fault {
	k, ok := kinds[r.Kind]
	if !ok {
		return fault("unknown_kind", "kind", "This store does not know records of kind %q. Update the program that runs here; the record is kept until then.", short([]byte(r.Kind)))
	}
	if r.V != 1 {
		return fault("unknown_kind", "v", "This store knows %s in version 1 only, not %d. Update the program that runs here; the record is kept until then.", r.Kind, r.V)
	}
	if class := LogClass(r.Log); k.logs[0] != "any" && !slices.Contains(k.logs, class) {
		return fault("wrong_log", "log", "A %s record belongs to the %s log, not to the %s log.", r.Kind, strings.Join(k.logs, " or "), class)
	}
	if (r.Kind == "site.registered" || r.Kind == "site.set") && r.Log != r.Subject {
		return fault("wrong_log", "log", "A %s record stands in the log of its own site: log and subject must be the same id.", r.Kind)
	}
	if f := k.checkBody(r.Body); f != nil {
		return f
	}
	return r.checkMeaning()
}
