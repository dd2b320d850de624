package store

import (
	"encoding/binary"

	"tripwell/forms"
)

// The read models. Integers are big-endian; site is the number of a log of the model (given in the order logs are first
// met in the book; org is one of them), n the number of a thing within its log, day a forms.Day with its sign bit
// turned over so that it sorts. Rows are packed (pack.go); nothing here comes from a clock, a setting or a map's order.
//
//	m_log    log 16                     → site 4 | things made | devices under test | entries | the site's own n, 0 for none (org is all zero)
//	m_site   site 4                     → log 16 | the register row of the site itself, so that a list of sites is one scan
//	m_thing  id 16 | site 4 | type 1    → n 4
//	m_reg    site 4 | type 1 | n 4      → register row: fields with everything that was said of them
//	m_work   site 4 | n 4               → work row of a device: last tests, dates, its newest entries
//	m_hist   site 4 | n 4 | seq 8       → older entries of that device, from that seq
//	m_said   site 4 | entry 16          → seqs of the corrections and withdrawals of an entry
//	m_seal   record 16 | site 4        → seqs of what says that the bytes of this record were dropped
//	m_granted person 16 | time 8 | clock 8 | record 16 → JSON of accessFact: what that person may do from then on
//	m_change person 16 | first received 8 | seq 8 → site 4 | entry 16: something that person said of an entry
//	m_due    site 4 | day 4 | n 4 | task → nothing: this device has this date
//	m_sum    site 4 | day 4 | grace 2 | period 2 | task | pauses, closed doors → how many such dates; under site 0 those of all sites together
//	m_also   as m_sum                   → what is open beside or instead of those dates, as they are counted by month; may be negative
//	m_keep   site 4 | task              → by month, what became of the dates that are done with
//	m_occ    site 4 | record 16         → an occasion: cause, day, tasks, how many devices (0 = the whole site)
//	m_pause  site 4 | pause 16          → the record that stands, days, reason, devices (none = the whole site)
//	m_fact   site 4 | n 4               → seqs of what was said of that device's defects and of its end; of an instrument's certificates and proofs
//	m_defect site 4 | n 4               → JSON of its defects, where there are any
//	m_flaw   defect 16 | site 4         → n 4: the device of a defect
//	m_open   site 4 | opened ms 8 | defect 16 → n 4 | flags 1: a defect that is not closed
//	m_tally  site 4 | month 4 | task    → results of the month, counted
//	m_bind   site 4 | subject 16 | tag 7 → what was said of this binding
//	m_tag    tag 7 | site 4 | subject 16 → nothing: a live binding
//	m_place  site 4 | place 16 | n 4    → nothing: a device whose own place this is
//	m_circuit site 4 | circuit 16 | 0 or 1 | n 4 → nothing: a device that hangs on this circuit; 0 where it protects all of it
//	m_feed   site 4 | id 16 | n 4       → nothing: a device that names this one as its source, or as what took its place, or
//	                                      an item of this depot that is at the site of this id
//	m_code   CODE 0 | site 4            → nothing
//	m_round  site 4 | n 4               → seqs of the ends and acceptances of a round
//	m_rule   type 1 | site 4 | name 0 | revision 4 → clock 8 | record 16 | JSON of a form, limit set, plan or list of usual places
//	m_todo   seq 8                      → work not yet done for that record, see todo.go
var (
	bktSiteLog  = []byte("m_log")
	bktSite     = []byte("m_site")
	bktThing    = []byte("m_thing")
	bktRegister = []byte("m_reg")
	bktWork     = []byte("m_work")
	bktHistory  = []byte("m_hist")
	bktSaid     = []byte("m_said")
	bktSeal     = []byte("m_seal")
	bktGranted  = []byte("m_granted")
	bktChange   = []byte("m_change")
	bktDue      = []byte("m_due")
	bktSum      = []byte("m_sum")
	bktAlso     = []byte("m_also")
	bktKeep     = []byte("m_keep")
	bktOccasion = []byte("m_occ")
	bktPause    = []byte("m_pause")
	bktFact     = []byte("m_fact")
	bktDefect   = []byte("m_defect")
	bktFlaw     = []byte("m_flaw")
	bktOpen     = []byte("m_open")
	bktTally    = []byte("m_tally")
	bktBind     = []byte("m_bind")
	bktTag      = []byte("m_tag")
	bktPlace    = []byte("m_place")
	bktCircuit  = []byte("m_circuit")
	bktFeed     = []byte("m_feed")
	bktCode     = []byte("m_code")
	bktRound    = []byte("m_round")
	bktRule     = []byte("m_rule")
	bktTodo     = []byte("m_todo")
)

var modelBuckets = [][]byte{bktSiteLog, bktSite, bktThing, bktRegister, bktWork, bktHistory, bktSaid, bktSeal, bktGranted, bktChange, bktDue, bktSum, bktAlso, bktKeep, bktOccasion, bktPause,
	bktFact, bktDefect, bktFlaw, bktOpen, bktTally, bktBind, bktTag, bktPlace, bktCircuit, bktFeed, bktCode, bktRound, bktRule, bktTodo}

// Types of things and of rules.
const (
	ofSite       = 's'
	ofPlace      = 'p'
	ofPanel      = 'b'
	ofCircuit    = 'c'
	ofDevice     = 'd'
	ofInstrument = 'i'
	ofRound      = 'r'

	ruleForm  = 'f'
	ruleLimit = 'l'
	rulePlan  = 'p'
	ruleUsual = 'u'
)

func putDay(b []byte, d forms.Day) []byte {
	return binary.BigEndian.AppendUint32(b, uint32(d)^1<<31)
}

func readDay(b []byte) forms.Day { return forms.Day(binary.BigEndian.Uint32(b) ^ 1<<31) }

func put32(b []byte, n uint32) []byte { return binary.BigEndian.AppendUint32(b, n) }
func read32(b []byte) uint32          { return binary.BigEndian.Uint32(b) }

func thingKey(id id16, site uint32, typ byte) []byte {
	return append(put32(append(make([]byte, 0, 21), id[:]...), site), typ)
}

func registerKey(site uint32, typ byte, n uint32) []byte {
	return put32(append(put32(make([]byte, 0, 9), site), typ), n)
}

func workKey(site, n uint32) []byte { return put32(put32(make([]byte, 0, 8), site), n) }

func historyKey(site, n uint32, seq uint64) []byte {
	return binary.BigEndian.AppendUint64(put32(put32(make([]byte, 0, 16), site), n), seq)
}

func saidKey(site uint32, entry id16) []byte {
	return append(put32(make([]byte, 0, 20), site), entry[:]...)
}

func sealKey(id id16, site uint32) []byte {
	return put32(append(make([]byte, 0, 20), id[:]...), site)
}

func dueKey(site uint32, day forms.Day, n uint32, task string) []byte {
	return append(put32(putDay(put32(make([]byte, 0, 12+len(task)), site), day), n), task...)
}

func keepKey(site uint32, task string) []byte {
	return append(put32(make([]byte, 0, 4+len(task)), site), task...)
}

// saidOfSite is the key of an occasion or a pause.
func saidOfSite(site uint32, id id16) []byte {
	return append(put32(make([]byte, 0, 20), site), id[:]...)
}

func flawKey(defect id16, site uint32) []byte {
	return put32(append(make([]byte, 0, 20), defect[:]...), site)
}

func openKey(site uint32, d *forms.Defect) []byte {
	b := binary.BigEndian.AppendUint64(put32(make([]byte, 0, 28), site), uint64(d.Opened))
	id := parseID(d.ID)
	return append(b, id[:]...)
}

// Flags of a row of m_open.
const (
	openInUse    = 1 << iota // it failed unsafely and may still be used
	openNuisance             // replace soon; nobody is at risk
)

func openRow(n uint32, d *forms.Defect) []byte {
	flags := byte(0)
	if d.InUse() {
		flags |= openInUse
	}
	if d.Severity == forms.Nuisance {
		flags |= openNuisance
	}
	return append(put32(nil, n), flags)
}

func tallyKey(site uint32, month int32, task string) []byte {
	return append(put32(put32(make([]byte, 0, 8+len(task)), site), uint32(month)), task...)
}

func bindKey(site uint32, subject id16, tag string) []byte {
	return append(append(put32(make([]byte, 0, 27), site), subject[:]...), tag...)
}

func tagKey(tag string, site uint32, subject id16) []byte {
	return append(put32(append(make([]byte, 0, 27), tag...), site), subject[:]...)
}

func placeKey(site uint32, place id16, n uint32) []byte {
	return put32(append(put32(make([]byte, 0, 24), site), place[:]...), n)
}

func circuitKey(site uint32, circuit id16, other bool, n uint32) []byte {
	key := append(put32(make([]byte, 0, 25), site), circuit[:]...)
	if other {
		return put32(append(key, 1), n)
	}
	return put32(append(key, 0), n)
}

func feedKey(site uint32, source id16, n uint32) []byte {
	return put32(append(put32(make([]byte, 0, 24), site), source[:]...), n)
}

func codeKey(code string, site uint32) []byte {
	return put32(append(append(make([]byte, 0, len(code)+5), code...), 0), site)
}

func ruleKey(typ byte, site uint32, name string, revision int) []byte {
	b := append(put32(append(make([]byte, 0, len(name)+10), typ), site), name...)
	return put32(append(b, 0), uint32(revision))
}
