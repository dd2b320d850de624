package store

import (
	"cmp"
	"math"
	"slices"

	"tripwell/forms"
)

// work is what the tests of one device come to. Its row is the one scattered page an entry changes.
type work struct {
	kind  string    // of the register; "" before the device is registered
	start forms.Day // the day it came under test
	ended forms.Day // the day it was retired; NoDay while it is in use
	came  forms.Day // the day its registration was received
	way   string    // how it came under test: forms.New | Replaced | Imported
	live  bool      // registered and not retired
	// flawed: it ever failed, or something was said of its defects. follows: it took another device's place.
	flawed, follows bool
	tasks           []taskState
	dates           []forms.DueDate // by task
	also            []alsoOpen      // how what is open differs from those dates
	past            []past          // the newest entries, in order of arrival
	older           uint64          // how many entries went to m_hist

	occasions []occasion // that name the device, by record
	repairs   []occasion // its defect.repaired, by record
	pauses    []pause    // that name the device, by pause

	was   workBefore
	dirty bool
}

// workBefore is what the indexes hold for the row as stored.
type workBefore struct {
	dates []forms.DueDate
	also  []alsoOpen
	kept  []taskKept
}

type taskKept struct {
	task string
	kept []forms.Kept
}

// taskState is what the entries of one task say together.
type taskState struct {
	task       string
	last       mark      // the newest entry, not-tested included
	conclusive mark      // the newest that failed or passed
	met        forms.Day // the newest day that moved the date, of whatever task the entry was
	numbers    []figure  // the measured values of last, by code

	kept []forms.Kept // what became of the dates that are done with
}

// figure is one measured value in its code's own unit.
type figure struct {
	code  string
	value float64
}

// figures gives the measured values among readings, by code.
func figures(readings map[string]forms.Reading) []figure {
	var out []figure
	for code, r := range readings {
		if v, ok := r.Float(); ok {
			out = append(out, figure{code, v})
		}
	}
	slices.SortFunc(out, func(a, b figure) int { return cmp.Compare(a.code, b.code) })
	return out
}

// mark names an entry by what orders it: day, then (clock, id).
type mark struct {
	day    forms.Day
	clock  uint64
	id     id16
	result uint8 // 0 = no entry
}

func (m mark) before(o mark) bool {
	if m.result == 0 || o.result == 0 {
		return m.result == 0 && o.result != 0
	}
	return cmp.Or(cmp.Compare(m.day, o.day), cmp.Compare(m.clock, o.clock), slices.Compare(m.id[:], o.id[:])) < 0
}

// past is one entry as the history keeps it.
type past struct {
	seq    uint64
	day    forms.Day
	task   string
	result uint8    // as judged after corrections; 0 = withdrawn
	met    []string // tasks whose date it moves

	came   forms.Day // the day this store received it
	locked bool      // somebody stood before a closed door
	said   bool      // corrections or a withdrawal are known of it
}

// Results as rows keep them.
var resultCodes = []string{"", forms.Fail, forms.ConditionalFail, forms.Incomplete, forms.ConditionalPass, forms.Pass, forms.NotTested}

func resultCode(result string) uint8 { return uint8(max(0, slices.Index(resultCodes, result))) }

const (
	codeFail            = 1
	codeConditionalFail = 2
	codeIncomplete      = 3
	codeConditionalPass = 4
	codePass            = 5
)

// conclusive results say that a device failed, or passed again: an incomplete or doubtful test does neither.
func conclusive(result uint8) bool {
	return result == codeFail || result == codePass || result == codeConditionalPass
}

// taskCodes are tasks as rows keep them; any other task is written out.
var taskCodes = []string{"", "button", "instrument", "receptacle"}

func (p *packer) task(task string) {
	i := max(0, slices.Index(taskCodes, task))
	p.byte(byte(i))
	if i == 0 {
		p.text(task)
	}
}

func (u *unpacker) task() string {
	i := u.byte()
	if i == 0 {
		return u.text()
	}
	if int(i) >= len(taskCodes) {
		u.fail()
		return ""
	}
	return taskCodes[i]
}

// An entry of a device comes into past; when keepPast are there, the oldest spillPast go to m_hist as one row.
const (
	keepPast  = 96
	spillPast = 64
)

func (w *work) task(task string) *taskState {
	i, ok := slices.BinarySearchFunc(w.tasks, task, func(t taskState, task string) int { return cmp.Compare(t.task, task) })
	if !ok {
		w.tasks = slices.Insert(w.tasks, i, taskState{task: task, met: forms.NoDay})
	}
	return &w.tasks[i]
}

// count takes one more entry into what the entries say together.
func (w *work) count(p past, m mark, numbers []figure) {
	if p.result == 0 {
		return
	}
	m.result = p.result
	t := w.task(p.task)
	if t.last.before(m) {
		t.last, t.numbers = m, numbers
	}
	if conclusive(p.result) && t.conclusive.before(m) {
		t.conclusive = m
	}
	for _, met := range p.met {
		if t := w.task(met); p.day > t.met {
			t.met = p.day
		}
	}
}

func (w *work) met(task string) forms.Day {
	for i := range w.tasks {
		if w.tasks[i].task == task {
			return w.tasks[i].met
		}
	}
	return forms.NoDay
}

func (p *packer) mark(m mark) {
	p.byte(m.result)
	if m.result != 0 {
		p.day(m.day)
		p.fixed(m.clock)
		p.id(m.id)
	}
}

func (u *unpacker) mark() (m mark) {
	if m.result = u.byte(); m.result != 0 {
		m.day, m.clock, m.id = u.day(), u.fixed(), u.id()
	}
	return m
}

// alsoOpen is a date that is open beside the one that comes next, or, with -1, one that stands in no month of its own: where
// an occasion was not met, it and what the plans ask for are open both, and only the earlier comes next.
type alsoOpen struct {
	forms.DueDate
	by int64
}

func (p *packer) date(d forms.DueDate) {
	p.task(d.Task)
	p.text(d.Plan)
	p.text(d.Cause)
	p.day(d.Due)
	p.int(int64(d.Due - d.Opens))
	p.int(int64(d.Until - d.Due))
	p.day(d.Last)
	p.int(int64(d.Every.Months))
	p.int(int64(d.Every.Days))
	p.uint(uint64(len(d.Shut))<<1 | uint64(bit(d.Tried)))
	for _, day := range d.Shut {
		p.day(day)
	}
}

func (u *unpacker) date() forms.DueDate {
	d := forms.DueDate{Task: u.task(), Plan: u.text(), Cause: u.text(), Due: u.day()}
	d.Opens = d.Due - forms.Day(u.int())
	d.Until = d.Due + forms.Day(u.int())
	d.Last = u.day()
	d.Every = forms.Interval{Months: int(u.int()), Days: int(u.int())}
	n := u.uint()
	d.Tried = n&1 != 0
	for n >>= 1; n > 0 && !u.bad; n-- {
		d.Shut = append(d.Shut, u.day())
	}
	return d
}

// pausing gives all dates of a row the pauses that were kept once.
func (w *work) pausing(pauses []forms.Pause) {
	if len(pauses) == 0 {
		return
	}
	for i := range w.dates {
		w.dates[i].Pauses = pauses
	}
	for i := range w.also {
		w.also[i].Pauses = pauses
	}
}

func (w *work) pack() []byte {
	p := packer{make([]byte, 0, 256+12*len(w.past))}
	flags := byte(0)
	for i, on := range []bool{w.live, w.flawed, w.follows} {
		if on {
			flags |= 1 << i
		}
	}
	p.byte(flags)
	p.text(w.kind)
	p.day(w.start)
	p.day(w.ended)
	p.day(w.came)
	p.text(w.way)
	p.uint(uint64(len(w.dates)))
	for _, d := range w.dates {
		p.date(d)
	}
	if len(w.dates) > 0 {
		p.spans(w.dates[0].Pauses)
		p.uint(uint64(len(w.also)))
	}
	for _, a := range w.also {
		p.int(a.by)
		p.date(a.DueDate)
	}
	p.uint(uint64(len(w.tasks)))
	for _, t := range w.tasks {
		p.task(t.task)
		p.day(t.met)
		p.mark(t.last)
		if t.last == t.conclusive {
			p.byte(0xff)
		} else {
			p.mark(t.conclusive)
		}
		p.figures(t.numbers)
		p.kept(t.kept)
	}
	p.saidOfDevice(w)
	p.uint(w.older)
	p.pasts(w.past)
	return p.b
}

// figureCodes are reading codes as rows keep them, in an order that only grows; any other code is written out.
var figureCodes = []string{"", "trip_current_ma", "test_current_ma", "trip_time_ms", "multiple", "phase_deg", "ground_ohm", "voltage_v",
	"neutral_ground_v", "load_a", "voltage_drop_pct", "retention_g", "electrode_ohm", "loop_ohm", "touch_voltage_v", "insulation_mohm",
	"insulation_test_v"}

func (p *packer) figures(list []figure) {
	p.uint(uint64(len(list)))
	for _, f := range list {
		i := max(0, slices.Index(figureCodes, f.code))
		p.byte(byte(i))
		if i == 0 {
			p.text(f.code)
		}
		p.fixed(math.Float64bits(f.value))
	}
}

func (u *unpacker) figures() []figure {
	n := u.uint()
	if n == 0 || n > uint64(len(u.b)) {
		return nil
	}
	list := make([]figure, 0, n)
	for range n {
		i, code := int(u.byte()), ""
		switch {
		case i == 0:
			code = u.text()
		case i < len(figureCodes):
			code = figureCodes[i]
		default:
			u.fail()
		}
		list = append(list, figure{code, math.Float64frombits(u.fixed())})
	}
	return list
}

func (p *packer) pasts(list []past) {
	p.uint(uint64(len(list)))
	seq, day := uint64(0), forms.Day(0)
	for _, e := range list {
		p.uint(e.seq - seq)
		p.int(int64(e.day - day))
		p.int(int64(e.came - e.day))
		seq, day = e.seq, e.day
		p.task(e.task)
		p.byte(e.result | byte(len(e.met)&3)<<4 | bit(e.said)<<6 | bit(e.locked)<<7)
		for _, m := range e.met {
			p.task(m)
		}
	}
}

func (u *unpacker) pasts() []past {
	n := u.uint()
	if n > uint64(len(u.b)) {
		u.fail()
		return nil
	}
	list := make([]past, 0, n+1)
	seq, day := uint64(0), forms.Day(0)
	for i := uint64(0); i < n && !u.bad; i++ {
		seq += u.uint()
		day += forms.Day(u.int())
		e := past{seq: seq, day: day, came: day + forms.Day(u.int()), task: u.task()}
		b := u.byte()
		e.result, e.said, e.locked = b&15, b&(1<<6) != 0, b&(1<<7) != 0
		e.met = u.metTasks(int(b >> 4 & 3))
		list = append(list, e)
	}
	return list
}

// metOne holds the usual lists, so that reading a history makes none.
var metOne = map[string][]string{"button": {"button"}, "instrument": {"instrument"}, "receptacle": {"receptacle"}}

func (u *unpacker) metTasks(n int) []string {
	if n == 0 {
		return nil
	}
	first := u.task()
	if one := metOne[first]; n == 1 && one != nil {
		return one
	}
	list := append(make([]string, 0, n), first)
	for len(list) < n && !u.bad {
		list = append(list, u.task())
	}
	return list
}

// unpackWork reads a row up to its entries and without what was kept, or with both.
func unpackWork(b []byte, entries bool) (*work, error) {
	u := unpacker{b: b}
	flags := u.byte()
	w := &work{live: flags&1 != 0, flawed: flags&2 != 0, follows: flags&4 != 0}
	w.kind, w.start, w.ended, w.came, w.way = kindName(u.bytes()), u.day(), u.day(), u.day(), wayName(u.bytes())
	n := u.uint()
	if n > uint64(len(b)) {
		return nil, errPacked
	}
	w.dates = make([]forms.DueDate, 0, n)
	for i := uint64(0); i < n && !u.bad; i++ {
		w.dates = append(w.dates, u.date())
	}
	if len(w.dates) > 0 {
		pauses := u.spans()
		for n := u.uint(); n > 0 && !u.bad; n-- {
			w.also = append(w.also, alsoOpen{by: u.int(), DueDate: u.date()})
		}
		w.pausing(pauses)
	}
	n = u.uint()
	if n > uint64(len(b)) {
		return nil, errPacked
	}
	w.tasks = make([]taskState, 0, n)
	for i := uint64(0); i < n && !u.bad; i++ {
		t := taskState{task: u.task(), met: u.day(), last: u.mark()}
		if len(u.b) > 0 && u.b[0] == 0xff {
			u.byte()
			t.conclusive = t.last
		} else {
			t.conclusive = u.mark()
		}
		t.numbers = u.figures()
		if t.kept = u.kept(entries); u.bad {
			break
		}
		w.tasks = append(w.tasks, t)
	}
	u.saidOfDevice(w)
	w.older = u.uint()
	if entries {
		w.past = u.pasts()
	}
	return w, u.err()
}

// kindNames spares the making of the same names.
var kindNames = func() map[string]string {
	m := map[string]string{}
	for _, k := range forms.Kinds() {
		m[k] = k
	}
	return m
}()

func kindName(b []byte) string {
	if s, ok := kindNames[string(b)]; ok {
		return s
	}
	return string(b)
}

// packSums adds the group's changes to the counts of dates and of results.
func (f *fold) packSums() error {
	for key, by := range f.sums {
		if by == 0 {
			continue
		}
		u := unpacker{b: f.on(bktSum).get([]byte(key))}
		n := int64(0)
		if len(u.b) > 0 {
			n = int64(u.uint())
		}
		if n += by; n < 0 || u.bad {
			return errPacked
		}
		p := packer{}
		p.uint(uint64(n))
		if n == 0 {
			p.b = nil
		}
		f.on(bktSum).put([]byte(key), p.b)
	}
	for key, by := range f.also {
		if by == 0 {
			continue
		}
		u := unpacker{b: f.on(bktAlso).get([]byte(key))}
		if len(u.b) > 0 {
			by += u.int()
		}
		p := packer{}
		if by != 0 {
			p.int(by)
		}
		if u.bad {
			return errPacked
		}
		f.on(bktAlso).put([]byte(key), p.b)
	}
	for key, t := range f.tallies {
		old, err := unpackTally(f.on(bktTally).get([]byte(key)))
		if err != nil {
			return err
		}
		empty := true
		p := packer{}
		for i := range t {
			n := old[i] + t[i]
			if n < 0 {
				return errPacked
			}
			empty = empty && n == 0
			p.uint(uint64(n))
		}
		if empty {
			p.b = nil
		}
		f.on(bktTally).put([]byte(key), p.b)
	}
	if err := f.packKeeps(); err != nil {
		return err
	}
	clear(f.sums)
	clear(f.also)
	clear(f.tallies)
	return nil
}

func unpackTally(row []byte) (t tally, err error) {
	if row == nil {
		return t, nil
	}
	u := unpacker{b: row}
	for i := range t {
		t[i] = int64(u.uint())
	}
	return t, u.err()
}
