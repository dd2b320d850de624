package store

import (
	"cmp"
	"encoding/binary"
	"slices"
	"time"

	"tripwell/forms"
	"tripwell/store/record"
)

// Defect is one fault of one device with where it is.
type Defect struct {
	forms.Defect
	Site    string
	Device  DeviceRow // Kind "" where the register does not hold the device
	OwnName string    // what the form calls its cause, where that is a check an organisation added
}

// OpenedAt is the moment it began.
func (d *Defect) OpenedAt() time.Time { return time.UnixMilli(d.Opened) }

// DefectAsk filters defects. Site is an id or code, "" for all of the scope.
type DefectAsk struct {
	Site     string
	State    string // one of forms.DefectStates; "" = every one that is not closed; DefectsInUse; DefectsAll
	Severity string // "" = any
	Device   string // id; "" = any
	On       forms.Day
}

// Further answers to which defects are asked for.
const (
	DefectsInUse = "in-use" // failed unsafely and neither made safe nor put right
	DefectsAll   = "all"
)

func (a *DefectAsk) takes(d *forms.Defect) bool {
	switch {
	case a.Severity != "" && d.Severity != a.Severity:
		return false
	case a.State == "":
		return d.State != forms.DefectClosed
	case a.State == DefectsAll:
		return true
	case a.State == DefectsInUse:
		return d.InUse()
	case a.State == forms.DefectMadeSafe:
		return d.Safe != nil && d.Closed == nil
	}
	return d.State == a.State
}

// Defects lists defects: what is still in use first, then what is open, the oldest first; closed ones last, the newest
// first.
func (v *View) Defects(ask DefectAsk) ([]Defect, error) {
	sites, err := v.sitesAsked(ask.Site)
	if err != nil {
		return nil, err
	}
	var out []Defect
	for _, sv := range sites {
		if err := v.siteDefects(sv, ask, &out); err != nil {
			return nil, err
		}
	}
	slices.SortFunc(out, func(a, b Defect) int {
		if c := cmp.Compare(defectRank(&a), defectRank(&b)); c != 0 {
			return c
		}
		if a.Closed != nil {
			return cmp.Or(cmp.Compare(b.Closed.At, a.Closed.At), cmp.Compare(a.ID, b.ID))
		}
		return cmp.Or(cmp.Compare(a.Opened, b.Opened), cmp.Compare(a.ID, b.ID))
	})
	return out, nil
}

func defectRank(d *Defect) int {
	switch {
	case d.Closed != nil:
		return 3
	case d.InUse():
		return 0
	case d.Severity != forms.Nuisance:
		return 1
	}
	return 2
}

func (v *View) sitesAsked(site string) ([]*siteView, error) {
	if site != "" {
		sv, err := v.siteNamed(site)
		return []*siteView{sv}, err
	}
	return v.everySite()
}

// siteDefects reads the index of open ones where no closed one is asked for, else every device that ever had any.
func (v *View) siteDefects(sv *siteView, ask DefectAsk, out *[]Defect) error {
	numbers, met := []uint32{}, map[uint32]bool{}
	bucket, prefix := bktOpen, put32(nil, sv.ord)
	if ask.State == DefectsAll || ask.State == forms.DefectClosed {
		bucket = bktDefect
	}
	err := v.scan(bucket, prefix, func(k, row []byte) error {
		at := row
		if len(k) == 8 {
			at = k[4:]
		}
		if n := read32(at); !met[n] {
			met[n], numbers = true, append(numbers, n)
		}
		return nil
	})
	if err != nil {
		return err
	}
	for _, n := range numbers {
		list, err := v.defectsAt(sv, n, ask.On)
		if err != nil {
			return err
		}
		for i := range list {
			if ask.takes(&list[i].Defect) && (ask.Device == "" || ask.Device == list[i].Device.ID) {
				*out = append(*out, list[i])
			}
		}
	}
	return nil
}

// defectsAt reads the defects of a device by its number.
func (v *View) defectsAt(sv *siteView, n uint32, on forms.Day) ([]Defect, error) {
	fl, err := unpackDefects(v.tx.Bucket(bktDefect).Get(workKey(sv.ord, n)))
	if err != nil || len(fl.Defects) == 0 {
		return nil, err
	}
	row, ok, err := v.rowAt(sv, n, on)
	if err != nil {
		return nil, err
	}
	if !ok {
		row = DeviceRow{ID: fl.Device, Site: sv.ID, SiteCode: sv.Code, Installed: forms.NoDay}
	}
	out := make([]Defect, 0, len(fl.Defects))
	for _, d := range fl.Defects {
		shown, ok, err := v.shownDefect(d)
		if err != nil {
			return nil, err
		}
		if !ok {
			continue
		}
		one := Defect{Defect: *shown, Site: sv.ID, Device: row}
		if one.OwnName, err = v.ownCause(d); err != nil {
			return nil, err
		}
		out = append(out, one)
	}
	return out, nil
}

// ownCause gives the name of a defect's cause, where that is a check an organisation added.
func (v *View) ownCause(d *forms.Defect) (string, error) {
	if !forms.IsOwn(d.Cause) || d.LastFail == "" {
		return "", nil
	}
	e, err := v.whole().Entry(d.LastFail)
	return e.OwnNames[d.Cause], err
}

// DeviceDefects gives a device's defects, oldest first, and the records about defects that a correction took away.
func (v *View) DeviceDefects(device string, on forms.Day) (list []Defect, loose []DefectStep, err error) {
	sv, d, err := v.findDevice(device)
	if err != nil {
		return nil, nil, err
	}
	fl, err := unpackDefects(v.tx.Bucket(bktDefect).Get(workKey(sv.ord, d.n)))
	if err != nil {
		return nil, nil, err
	}
	for _, id := range fl.Loose {
		if is, err := v.showsID(id); err != nil {
			return nil, nil, err
		} else if !is {
			continue
		}
		step, err := v.defectStep(id)
		if err != nil {
			return nil, nil, err
		}
		loose = append(loose, step)
	}
	list, err = v.defectsAt(sv, d.n, on)
	return list, loose, err
}

var errNoDefect = &Error{Code: "not_found", Field: "defect", Text: "There is no such defect here, or it is not yours to see. Where the test it followed from was corrected or withdrawn, the defect went with it: look at the device's tests."}

// Defect gives one defect.
func (v *View) Defect(id string, on forms.Day) (Defect, error) {
	key := parseID(id)
	var found *Defect
	err := v.scan(bktFlaw, key[:], func(k, row []byte) error {
		sv, ok, err := v.openOrd(read32(k[16:]))
		if err != nil || !ok || found != nil {
			return err
		}
		list, err := v.defectsAt(sv, read32(row), on)
		for i := range list {
			if list[i].ID == id {
				found = &list[i]
			}
		}
		return err
	})
	if err != nil {
		return Defect{}, err
	}
	if key == (id16{}) || found == nil {
		return Defect{}, errNoDefect
	}
	return *found, nil
}

// DefectStep is one record of a defect's history.
type DefectStep struct {
	Record, Kind, By string
	At               time.Time
	Text             string // what the person wrote
	To               string // person or crew it was assigned to
	With             string // device that took the failed one's place
	Parts            []string
	Photos           []string
	Entry            *Entry // of a test
	Sealed           *Seal  // its bytes were dropped: it says nothing any more
}

// DefectHistory reads what happened to a defect, in its order.
func (v *View) DefectHistory(d Defect) ([]DefectStep, error) {
	out := make([]DefectStep, 0, len(d.History))
	for _, id := range d.History {
		step, err := v.defectStep(id)
		if err != nil {
			return nil, err
		}
		out = append(out, step)
	}
	return out, nil
}

func (v *View) defectStep(id string) (DefectStep, error) {
	r, st, _, _, err := v.recordAt(parseID(id))
	if err != nil {
		return DefectStep{}, err
	}
	step := DefectStep{Record: r.ID, Kind: r.Kind, By: r.By, At: happened(r, st)}
	if r.Kind == "entry.made" || r.Kind == "entry.imported" {
		e, err := v.Entry(id)
		step.Entry = &e
		return step, err
	}
	if r.Sealed != "" {
		if step.Sealed, err = v.Sealed(id); err != nil {
			return step, err
		}
	}
	body, err := readDefect(r)
	if err != nil {
		return step, err
	}
	step.Text, step.To, step.With, step.Parts, step.Photos = body.Text+body.How+body.Reason, cmp.Or(body.To, body.Crew), body.With, body.parts(), photosOf(r)
	return step, nil
}

// DefectSums counts what is open in one site.
type DefectSums struct {
	Site     Site
	Devices  int       // devices with an open defect
	Open     int       // defects
	InUse    int       // devices that failed unsafely and may still be used
	Nuisance int       // defects to be replaced soon, nobody at risk
	Since    time.Time // since when the oldest of those in use; zero where none is
	SinceID  string    // that defect

}

// DefectSums counts a site's open defects by its index alone.
func (v *View) DefectSums(site string) (DefectSums, error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return DefectSums{}, err
	}
	if v.scope.Period != nil {
		return v.defectSumsShown(sv)
	}
	sums := DefectSums{Site: sv.Site}
	devices, inUse := map[uint32]bool{}, map[uint32]bool{}
	err = v.scan(bktOpen, put32(nil, sv.ord), func(k, row []byte) error {
		if len(k) != 28 || len(row) != 5 {
			return errPacked
		}
		n := read32(row)
		devices[n] = true
		sums.Open++
		if row[4]&openNuisance != 0 {
			sums.Nuisance++
		}
		if row[4]&openInUse != 0 {
			inUse[n] = true
			if sums.Since.IsZero() { // the oldest comes first
				sums.Since, sums.SinceID = time.UnixMilli(int64(binary.BigEndian.Uint64(k[4:]))), record.IDText(k[12:])
			}
		}
		return nil
	})
	sums.Devices, sums.InUse = len(devices), len(inUse)
	return sums, err
}

// OpenDefects counts the open defects of a site's devices, by device id; a device without any is not among them.
func (v *View) OpenDefects(site string) (map[string]int, error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return nil, err
	}
	if v.scope.Period != nil {
		list, err := v.Defects(DefectAsk{Site: sv.ID, On: sv.today})
		out := map[string]int{}
		for i := range list {
			out[list[i].Device.ID]++
		}
		return out, err
	}
	numbers, out := map[uint32]int{}, map[string]int{}
	err = v.scan(bktOpen, put32(nil, sv.ord), func(_, row []byte) error {
		numbers[read32(row)]++
		return nil
	})
	for n, count := range numbers {
		if v.tx.Bucket(bktRegister).Get(registerKey(sv.ord, ofDevice, n)) == nil {
			continue // tested or found faulty before anybody registered it
		}
		id, idErr := v.deviceIDOf(sv, n)
		if idErr != nil {
			return nil, idErr
		}
		out[id] = count
	}
	return out, err
}

// defectSumsShown counts what a scope with a period shows, defect by defect.
func (v *View) defectSumsShown(sv *siteView) (DefectSums, error) {
	sums := DefectSums{Site: sv.Site}
	list, err := v.Defects(DefectAsk{Site: sv.ID, On: sv.today})
	devices, inUse := map[string]bool{}, map[string]bool{}
	for i := range list {
		d := &list[i]
		sums.Open++
		devices[d.Device.ID] = true
		if d.Severity == forms.Nuisance {
			sums.Nuisance++
		}
		if d.InUse() {
			inUse[d.Device.ID] = true
			if sums.Since.IsZero() || d.OpenedAt().Before(sums.Since) {
				sums.Since, sums.SinceID = d.OpenedAt(), d.ID
			}
		}
	}
	sums.Devices, sums.InUse = len(devices), len(inUse)
	return sums, err
}

// DefectPast sums up what a site's defects came to.
type DefectPast struct {
	Closed     int
	MeanRepair time.Duration // of the closed ones, from the first fail to the closing; 0 where none is closed
	Repeat     []Repeat      // places and items that failed more than once, most first
}

// Repeat is a place, or an item that travels, whose devices failed more than once.
type Repeat struct {
	Device DeviceRow // the one that stands there now
	Times  int
	Last   forms.Day
}

// DefectPast reads all defects of a site. A place counts with all its devices, since a second new device failing at one
// place points at the wiring.
func (v *View) DefectPast(site string, on forms.Day) (DefectPast, error) {
	all, err := v.Defects(DefectAsk{Site: site, State: DefectsAll, On: on})
	if err != nil {
		return DefectPast{}, err
	}
	out := DefectPast{}
	total := int64(0)
	at, met := map[string]*Repeat{}, map[string]bool{}
	for i := range all {
		d := &all[i]
		if d.Closed != nil {
			out.Closed++
			total += max(0, d.Closed.At-d.Opened)
		}
		key := cmp.Or(d.Device.Place.ID, d.Device.ID)
		r := at[key]
		if r == nil {
			r = &Repeat{Device: d.Device, Last: d.Day}
			at[key] = r
		}
		if r.Device.Retired && !d.Device.Retired {
			r.Device = d.Device
		}
		if r.Last = max(r.Last, d.Day); !met[d.First] { // one test may fail by several readings
			met[d.First] = true
			r.Times++
		}
	}
	if out.Closed > 0 {
		out.MeanRepair = time.Duration(total/int64(out.Closed)) * time.Millisecond
	}
	for _, r := range at {
		if r.Times > 1 {
			out.Repeat = append(out.Repeat, *r)
		}
	}
	slices.SortFunc(out.Repeat, func(a, b Repeat) int {
		return cmp.Or(cmp.Compare(b.Times, a.Times), cmp.Compare(b.Last, a.Last), cmp.Compare(a.Device.ID, b.Device.ID))
	})
	return out, nil
}
