package results

import (
	"fmt"
	"strings"

	"tripwell/export/intake"
	"tripwell/export/paper"
	"tripwell/forms"
	"tripwell/store"
	"tripwell/store/record"
)

// finder finds the device a row speaks of, by tag or by where it is.
type finder struct {
	v      *store.View
	p      *planner
	sites  []store.Site
	index  map[string]*siteIndex // by site id
	full   map[string]*device    // by device id
	rounds map[string]string     // site id + code → id; a site alone: its rounds were read
}

// siteIndex is a site's devices in use by the ways people name their places.
type siteIndex struct {
	store.Site
	today   forms.Day
	rows    []store.DeviceRow
	byPlace map[string][]int
	supply  map[string]any // by circuit id
}

// device is what a test needs to know of its device.
type device struct {
	store.Device
	site *siteIndex
}

// searchedSites is the most sites a place is looked for in, where a row does not say its site.
const searchedSites = 12

func newFinder(v *store.View, p *planner) (*finder, error) {
	f := &finder{v: v, p: p, index: map[string]*siteIndex{}, full: map[string]*device{}}
	var err error
	f.sites, err = v.Sites()
	return f, err
}

// found is the answer of a search: the device, or a state and what is wrong. err is a failure of the store.
type found struct {
	*device
	state, column, text string
}

func missed(state, column, text string) (found, error) {
	return found{state: state, column: column, text: text}, nil
}

// find looks a row's device up.
func (f *finder) find(r *row) (found, error) {
	if text := r.text("tag"); text != "" {
		return f.byTag(text)
	}
	sites, state, why := f.sitesOf(r)
	if why != "" {
		return missed(state, aboutSite, why)
	}
	var fits []*siteIndex
	var which []int
	for _, s := range sites {
		idx, err := f.site(s)
		if err != nil {
			return found{}, err
		}
		for _, i := range idx.matches(r) {
			fits, which = append(fits, idx), append(which, i)
		}
	}
	switch len(which) {
	case 1:
		d, err := f.device(fits[0], fits[0].rows[which[0]].ID)
		return found{device: d}, err
	case 0:
		if !r.namesPlace() {
			return missed(LeftOut, "tag", "The row says neither tag nor place. Write one of them.")
		}
		return missed(Parked, "place", "No device is known at this place. Register it, or write the place as the register does, then import this row again.")
	}
	return missed(LeftOut, "place", fmt.Sprintf("%d devices fit this place. Write the tag, or building, floor, room and place.", len(which)))
}

// byTag reads a tag in any of its forms: with hyphens, in lower case, or the address a label carries.
func (f *finder) byTag(text string) (found, error) {
	tag, ok := record.ParseTag(text)
	if !ok {
		return missed(Parked, "tag", "This is no tag: its check character does not fit. Read the label again and correct it.")
	}
	holders, err := f.v.Tag(tag)
	if err != nil {
		return found{}, err
	}
	switch len(holders) {
	case 0:
		return missed(Parked, "tag", "No device is known under this tag. Bind the tag to its place first, then import this row again.")
	case 1:
	default:
		return missed(LeftOut, "tag", "This tag is bound twice. Settle on the device's page which binding stands, then import this row again.")
	}
	if holders[0].Device == "" {
		return missed(Parked, "tag", "The place of this tag has no device in use. Register its device, then import this row again.")
	}
	for _, s := range f.sites {
		if s.ID != holders[0].Site {
			continue
		}
		idx, err := f.site(s)
		if err != nil {
			return found{}, err
		}
		d, err := f.device(idx, holders[0].Device)
		if err == nil && d.Retired {
			return missed(LeftOut, "tag", "The device of this tag was retired. Enter its test on the device's page, or leave the row out.")
		}
		return found{device: d}, err
	}
	return missed(Parked, "tag", "No device is known under this tag. Bind the tag to its place first, then import this row again.")
}

// sitesOf gives the sites a row may speak of: the one it names, the one its worksheet is named for, the one of the whole
// file, or all where they are few.
func (f *finder) sitesOf(r *row) (sites []store.Site, state, why string) {
	named := func(text string) []store.Site {
		for _, s := range f.sites {
			if text != "" && (strings.EqualFold(s.Code, text) || intake.Label(s.Name) == intake.Label(text)) {
				return []store.Site{s}
			}
		}
		return nil
	}
	if text := r.text(aboutSite); text != "" {
		if s := named(text); s != nil {
			return s, "", ""
		}
		return nil, Parked, "There is no such site here. Write its code, or register the site first."
	}
	if s := named(r.sheetName()); s != nil {
		return s, "", ""
	}
	if f.p.ask.Site != "" {
		if s := named(f.p.ask.Site); s != nil {
			return s, "", ""
		}
		return nil, Parked, "There is no such site here. Choose one of the list."
	}
	if len(f.sites) > searchedSites {
		return nil, LeftOut, "The row does not say its site. Add a column Site, or choose the site for the whole file."
	}
	return f.sites, "", ""
}

func (f *finder) site(s store.Site) (*siteIndex, error) {
	if idx, ok := f.index[s.ID]; ok {
		return idx, nil
	}
	idx := &siteIndex{Site: s, today: forms.DayOf(f.p.now.In(s.Location())), byPlace: map[string][]int{}, supply: map[string]any{}}
	for d, err := range f.v.Devices(s.ID) {
		if err != nil {
			return nil, err
		}
		if d.Retired {
			continue
		}
		i := len(idx.rows)
		idx.rows = append(idx.rows, d)
		for key := range placeKeys(d) {
			idx.byPlace[key] = append(idx.byPlace[key], i)
		}
	}
	circuits, err := f.v.Circuits(s.ID)
	if err != nil {
		return nil, err
	}
	for _, c := range circuits {
		idx.supply[c.ID] = c.Fields["supply"]
	}
	f.index[s.ID] = idx
	return idx, nil
}

func (f *finder) device(idx *siteIndex, id string) (*device, error) {
	if d, ok := f.full[id]; ok {
		return d, nil
	}
	full, err := f.v.Device(id, idx.today)
	if err != nil {
		return nil, err
	}
	d := &device{full, idx}
	f.full[id] = d
	return d, nil
}

// placeKeys are the texts a device's place may be written as: its name alone and with ever more of what is around it.
func placeKeys(d store.DeviceRow) map[string]bool {
	keys := map[string]bool{}
	add := func(parts ...string) {
		if key := intake.Label(strings.Join(parts, " ")); key != "" {
			keys[key] = true
		}
	}
	p := d.Place
	add(p.Name)
	add(p.Room, p.Name)
	add(p.Floor, p.Room, p.Name)
	add(p.Building, p.Floor, p.Room, p.Name)
	add(p.Building, p.Room, p.Name)
	add(p.Building, p.Name)
	if d.Panel != "" {
		add(d.Panel, d.Circuit)
	}
	return keys
}

// matches gives the devices that fit everything a row says of where it is. The kind, a title
// above the row and the worksheet's name only tell apart what would be several.
func (s *siteIndex) matches(r *row) []int {
	fits := s.candidates(r)
	for _, field := range []struct {
		about string
		of    func(d *store.DeviceRow) string
	}{
		{aboutBuilding, func(d *store.DeviceRow) string { return d.Place.Building }},
		{aboutFloor, func(d *store.DeviceRow) string { return d.Place.Floor }},
		{aboutRoom, func(d *store.DeviceRow) string { return d.Place.Room }},
		{aboutPanel, func(d *store.DeviceRow) string { return d.Panel }},
		{"circuit", func(d *store.DeviceRow) string { return d.Circuit }},
	} {
		want := intake.Label(r.text(field.about))
		if want == "" {
			continue
		}
		fits = keep(fits, func(i int) bool {
			have := intake.Label(field.of(&s.rows[i]))
			// A round sheet writes panel and circuit into one cell.
			return have == want || field.about == "circuit" && intake.Label(s.rows[i].Panel+" "+s.rows[i].Circuit) == want
		})
	}
	if len(fits) > 1 {
		if kind := r.kind(); kind != "" {
			fits = orAll(fits, keep(fits, func(i int) bool { return s.rows[i].Kind == kind }))
		}
	}
	for _, hint := range []string{r.section, r.sheetName()} {
		if len(fits) > 1 && hint != "" {
			fits = orAll(fits, keep(fits, func(i int) bool {
				p := s.rows[i].Place
				return hinted(hint, p.Building) || hinted(hint, p.Floor) || hinted(hint, p.Room)
			}))
		}
	}
	return fits
}

// hinted reports whether a title or a worksheet's name says a building, floor or room: "Ground floor" says Ground.
func hinted(hint, part string) bool {
	words, have := "_"+intake.Label(hint)+"_", intake.Label(part)
	return have != "" && strings.Contains(words, "_"+have+"_")
}

// candidates are the devices of the place as it is written, or all where a row says room or panel only.
func (s *siteIndex) candidates(r *row) []int {
	if text := intake.Label(r.text("place")); text != "" {
		return s.byPlace[text]
	}
	if !r.namesPlace() {
		return nil
	}
	if text := intake.Label(r.text(aboutPanel) + " " + r.text("circuit")); len(s.byPlace[text]) > 0 {
		return s.byPlace[text]
	}
	all := make([]int, len(s.rows))
	for i := range all {
		all[i] = i
	}
	return all
}

func keep(list []int, fits func(int) bool) []int {
	var out []int
	for _, i := range list {
		if fits(i) {
			out = append(out, i)
		}
	}
	return out
}

func orAll(all, some []int) []int {
	if len(some) == 0 {
		return all
	}
	return some
}

// findRound names the round a row came from by its id; a code nobody here has stays in the note.
func (f *finder) findRound(t *test) error {
	code := strings.ToUpper(strings.ReplaceAll(t.round, " ", ""))
	if code == "" {
		return nil
	}
	site := t.device.Site
	if f.rounds == nil {
		f.rounds = map[string]string{}
	}
	if _, read := f.rounds[site]; !read {
		list, err := f.v.Rounds(site)
		if err != nil {
			return err
		}
		f.rounds[site] = ""
		for _, r := range list {
			f.rounds[site+r.Code] = r.ID
		}
	}
	id := f.rounds[site+code]
	if id == "" {
		t.notes = append(t.notes, t.row.head(paper.AboutRound)+": "+brief(t.round))
	}
	t.round = id
	return nil
}
