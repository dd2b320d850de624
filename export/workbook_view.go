package export

import (
	"cmp"
	"errors"
	"io"
	"iter"
	"time"

	"tripwell/forms"
	"tripwell/static"
	"tripwell/store"
	"tripwell/store/record"
)

// WorkbookAsk says which part of a store goes into a workbook.
type WorkbookAsk struct {
	Site         string    // id or code; "" = every site of the scope
	From, To     forms.Day // test days, both included; NoDay: open
	Now          time.Time // the moment of the workbook; decides what is due
	Organisation string
	Access       string // what the reader's access covers, where it covers less than all; "" = nothing to say
	Store        string // store id
	Epoch        int
	Demo         bool
	AllSites     bool   // the scope covers the whole organisation
	Head         string // signed head text, "" without one
	NoHead       string // why there is none
	// Progress is told now and then how many tests are written, and about how many there are in all. An error ends the
	// workbook. It may be nil.
	Progress func(done, total int) error
}

// WorkbookOf signs a head, reads the store at one moment within a scope and writes the workbook: the one way the
// command and the office page make it.
func WorkbookOf(w io.Writer, s *store.Store, scope store.Scope, ask WorkbookAsk) error {
	// Signed before the read begins: a transaction that writes must not wait inside one that reads. The head may
	// therefore stand a few records before the sizes on the cover, never after.
	head, err := s.SignedHead()
	var refused *store.Error
	switch {
	case errors.As(err, &refused):
		// A store that must not sign (it is shorter than what it signed) still opens its books: the cover says why.
		ask.NoHead = refused.Text
	case err != nil:
		return err
	}
	ask.Head, ask.Store, ask.Epoch, ask.Demo = head, s.ID(), s.Epoch(), s.Demo()
	if ask.Now.IsZero() {
		ask.Now = s.Now()
	}
	ask.AllSites = scope.All && ask.Site == ""
	return s.View(scope, func(v *store.View) error {
		src, err := FromView(v, ask)
		if err != nil {
			return err
		}
		return Workbook(w, src)
	})
}

// FromView describes the workbook of a view. The sequences read the view while the workbook is written, so it must be
// written before the view ends.
func FromView(v *store.View, ask WorkbookAsk) (WorkbookSource, error) {
	src := WorkbookSource{
		Organisation: ask.Organisation, Access: ask.Access, AllSites: ask.AllSites, From: ask.From, To: ask.To, AsOf: ask.Now, Store: ask.Store, Epoch: ask.Epoch,
		Demo: ask.Demo, Head: ask.Head, NoHead: ask.NoHead, PersonName: v.PersonName,
	}
	var err error
	if src.Sites, err = sitesOf(v, ask.Site); err != nil {
		return src, err
	}
	if src.Logs, err = logLines(v, src.Sites, ask.Site == ""); err != nil {
		return src, err
	}
	refused, err := v.Refused()
	if err != nil {
		return src, err
	}
	src.Refused = countRefused(refused, src.Sites, ask.Site == "")
	sets, err := v.LimitSets()
	if err != nil {
		return src, err
	}
	words, err := static.ReadWords("en")
	if err != nil {
		return src, err
	}
	asked, err := v.Forms()
	if err != nil {
		return src, err
	}
	src.Limits = limitLines(words, sets, asked)
	if err := src.moreLines(v, ask); err != nil {
		return src, err
	}
	src.Devices = deviceLines(v, src.Sites)
	src.Due = dueLines(v, src.Sites, ask.Now)
	reader := entryReader{view: v, ask: ask, sets: map[string]*forms.LimitSet{}, forms: map[string]*forms.Form{}}
	for _, set := range sets {
		reader.sets[limitRevision(set.ID, set.Revision)] = set
	}
	if src.Entries, err = reader.lines(src.Sites); err != nil || ask.Progress == nil {
		return src, err
	}
	total, err := entriesIn(v, src.Sites, ask)
	src.Entries = counted(src.Entries, total, ask.Progress)
	return src, err
}

// entriesIn counts the tests of a workbook by the months they were made in: a little more than there are where a period
// begins or ends within a month, a little fewer where tests were withdrawn.
func entriesIn(v *store.View, sites []store.Site, ask WorkbookAsk) (total int, err error) {
	for _, site := range sites {
		tallies, err := v.Tallies(site.ID)
		if err != nil {
			return 0, err
		}
		for _, t := range tallies {
			first, end := forms.Date(t.Year, time.Month(t.Month), 1), forms.Date(t.Year, time.Month(t.Month)+1, 1)
			if ask.To != forms.NoDay && first > ask.To || ask.From != forms.NoDay && end <= ask.From {
				continue
			}
			for _, n := range t.Results {
				total += n
			}
		}
	}
	return total, nil
}

// progressEntries is how often progress is told.
const progressEntries = 250

// counted tells how many entries have been read.
func counted(lines iter.Seq2[EntryLine, error], total int, tell func(done, total int) error) iter.Seq2[EntryLine, error] {
	return func(yield func(EntryLine, error) bool) {
		done := 0
		for line, err := range lines {
			if done%progressEntries == 0 && err == nil {
				err = tell(done, total)
			}
			if done++; !yield(line, err) || err != nil {
				return
			}
		}
		if err := tell(done, max(done, total)); err != nil {
			yield(EntryLine{}, err)
		}
	}
}

func sitesOf(v *store.View, site string) ([]store.Site, error) {
	if site == "" {
		return v.Sites()
	}
	s, err := v.Site(site)
	return []store.Site{s}, err
}

func logLines(v *store.View, sites []store.Site, all bool) ([]LogLine, error) {
	heads, err := v.Logs()
	if err != nil {
		return nil, err
	}
	codes := siteCodes(sites)
	var lines []LogLine
	for _, h := range heads {
		code, ours := codes[h.Log]
		if ours || all || h.Log == "org" {
			lines = append(lines, LogLine{h, code})
		}
	}
	return lines, nil
}

func siteCodes(sites []store.Site) map[string]string {
	codes := make(map[string]string, len(sites))
	for _, s := range sites {
		codes[s.ID] = s.Code
	}
	return codes
}

func countRefused(refused []store.Refusal, sites []store.Site, all bool) (n int) {
	codes := siteCodes(sites)
	for _, r := range refused {
		if _, ours := codes[r.Log]; ours || all {
			n++
		}
	}
	return n
}

func deviceLines(v *store.View, sites []store.Site) iter.Seq2[DeviceLine, error] {
	return func(yield func(DeviceLine, error) bool) {
		codes := map[string]string{}
		every, err := v.Sites()
		if err != nil {
			yield(DeviceLine{}, err)
			return
		}
		for _, site := range every {
			codes[site.ID] = site.Code
		}
		for _, site := range sites {
			fields, circuits, err := registerFields(v, site.ID)
			if err != nil {
				yield(DeviceLine{}, err)
				return
			}
			names, err := sourceNames(v, site.ID, fields)
			if err != nil {
				yield(DeviceLine{}, err)
				return
			}
			for d, err := range v.Devices(site.ID) {
				line := DeviceLine{Site: site, Device: d, Fields: fields[d.ID], Circuit: circuits[d.Panel+"\x1f"+d.Circuit], AtSite: codes[d.AtSite]}
				if source, _ := fields[d.ID]["fed_by"].(string); source != "" {
					line.Source = names[source]
				}
				if err == nil {
					line.Imported, err = importedTasks(v, d)
				}
				if !yield(line, err) || err != nil {
					return
				}
			}
		}
	}
}

// sourceNames names the devices of a site that others hang on as an import finds them again: by tag, else by place, else by id.
func sourceNames(v *store.View, site string, fields map[string]map[string]any) (map[string]string, error) {
	names := map[string]string{}
	for _, f := range fields {
		if source, _ := f["fed_by"].(string); source != "" {
			names[source] = source
		}
	}
	if len(names) == 0 {
		return names, nil
	}
	for d, err := range v.Devices(site) {
		if err != nil {
			return nil, err
		}
		if _, named := names[d.ID]; !named {
			continue
		}
		now := d
		for range 16 { // what took its place feeds what it fed
			one, err := v.Device(now.ID, d.Installed)
			if err != nil || one.With == "" {
				break
			}
			if next, err := v.Device(one.With, d.Installed); err == nil {
				now = next.DeviceRow
			}
		}
		names[d.ID] = cmp.Or(TagText(now.Tag), PlaceText(now.Place), now.ID)
	}
	return names, nil
}

// importedTasks are the tasks whose last test nobody here witnessed, in the order of tasks.
func importedTasks(v *store.View, d store.DeviceRow) (tasks []string, err error) {
	for _, task := range forms.Tasks() {
		last, ok := d.Last[task]
		if !ok {
			continue
		}
		unseen, err := v.Unwitnessed(&d, task, last.Day)
		if err != nil {
			return nil, err
		}
		if unseen {
			tasks = append(tasks, task)
		}
	}
	return tasks, nil
}

// registerFields are the fields of a site's devices by id, and of its circuits by panel and numbers.
func registerFields(v *store.View, site string) (devices, circuits map[string]map[string]any, err error) {
	if devices, err = v.DeviceFields(site); err != nil {
		return nil, nil, err
	}
	list, err := v.Circuits(site)
	circuits = make(map[string]map[string]any, len(list))
	for _, c := range list {
		circuits[c.Panel+"\x1f"+c.Numbers] = c.Fields
	}
	return devices, circuits, err
}

// dueLines asks each site for its own day: near midnight two zones have two.
func dueLines(v *store.View, sites []store.Site, now time.Time) iter.Seq2[DueLine, error] {
	return func(yield func(DueLine, error) bool) {
		for _, site := range sites {
			ask := store.DueAsk{On: forms.DayOf(now.In(site.Location())), Until: forms.NoDay, Site: site.ID}
			for d, err := range v.Due(ask) {
				line := DueLine{Site: site, DueRow: d}
				if err == nil && d.Last != forms.NoDay {
					line.Imported, err = v.Unwitnessed(&d.Device, d.Task, d.Last)
				}
				if !yield(line, err) || err != nil {
					return
				}
			}
		}
	}
}

// entryReader puts what an entry's row says in words beside the entry.
type entryReader struct {
	view        *store.View
	ask         WorkbookAsk
	instruments map[string]string
	sets        map[string]*forms.LimitSet // by set and revision
	forms       map[string]*forms.Form
}

func (r *entryReader) lines(sites []store.Site) (iter.Seq2[EntryLine, error], error) {
	list, err := r.view.Forms()
	if err != nil {
		return nil, err
	}
	for _, f := range list {
		r.forms[f.ID] = f
	}
	instruments, err := r.view.Instruments()
	if err != nil {
		return nil, err
	}
	r.instruments = make(map[string]string, len(instruments))
	for _, i := range instruments {
		r.instruments[i.ID] = joinSpace(i.Name, i.Serial)
	}
	return func(yield func(EntryLine, error) bool) {
		for _, site := range sites {
			if !r.site(site, yield) {
				return
			}
		}
	}, nil
}

// site holds the devices of one site at a time.
func (r *entryReader) site(site store.Site, yield func(EntryLine, error) bool) bool {
	devices := map[string]store.DeviceRow{}
	for d, err := range r.view.Devices(site.ID) {
		if err != nil {
			yield(EntryLine{}, err)
			return false
		}
		d.Due, d.Last = nil, nil
		devices[d.ID] = d
	}
	zone, today := site.Location(), forms.DayOf(r.ask.Now.In(site.Location()))
	for e, err := range r.view.SiteEntries(site.ID, r.ask.From, r.ask.To) {
		if err != nil {
			yield(EntryLine{}, err)
			return false
		}
		row, ok := devices[e.Device]
		if !ok {
			// A retired device, or one whose registration has not arrived: its entries still count.
			if d, err := r.view.Device(e.Device, today); err == nil {
				row = d.DeviceRow
			}
			row.Due, row.Last = nil, nil
			devices[e.Device] = row
		}
		if !yield(r.line(e, site, zone, row), nil) {
			return false
		}
	}
	return true
}

func (r *entryReader) line(e store.Entry, site store.Site, zone *time.Location, row store.DeviceRow) EntryLine {
	line := EntryLine{Entry: e, Site: site, Zone: zone, DeviceRow: row}
	line.ByName, line.ReadName, line.TypedName = r.person(e.By), r.person(e.ReadBy), r.person(e.TypedBy)
	if id := e.Body.Given.Instrument; id != "" {
		if line.Instrument = r.instruments[id]; line.Instrument == "" {
			line.Instrument = id
		}
	}
	line.Replaced = r.replaced(e)
	return line
}

func (r *entryReader) person(id string) string {
	if name := r.view.PersonName(id); name != "" || record.IsID(id) {
		return name
	}
	return id // written down by name
}

// replaced judges again, under the same limits, what each correction took out of force.
func (r *entryReader) replaced(e store.Entry) []Replaced {
	if len(e.Corrections) == 0 || e.Sealed != nil {
		return nil
	}
	bodies := []forms.Entry{e.Original}
	for _, c := range e.Corrections {
		if !c.InForce {
			bodies = append(bodies, c.Body)
		}
	}
	out := make([]Replaced, len(bodies))
	for i, body := range bodies {
		out[i] = Replaced{Body: body, Verdict: r.judge(body, e)}
	}
	return out
}

func joinSpace(a, b string) string {
	if a != "" && b != "" {
		return a + " " + b
	}
	return a + b
}
