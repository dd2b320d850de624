package store

import (
	"bytes"
	"cmp"
	"slices"

	"tripwell/forms"
)

// The protection map is not stored. Two indexes say who hangs on a circuit and who names a device as its source (m_circuit,
// m_feed); what stands around a device or a circuit is walked from there whenever it is asked for, so a change costs two keys
// and a look costs the devices it shows, however large the site is. What it comes to is a pure function of the register:
// the fields' winners with their (clock, id), never the order things arrived in.

// OnMap is a device on the protection map.
type OnMap struct {
	DeviceRow
	Stands          string // how it stands as a protector: forms.StandsWell, …; "" where it is gone
	Source          string // the device its record names as the source of its power, "" for none; forms.ProtectionMap says whether it is taken in
	EquipmentGround string // yes | none-permitted | ""
	Faces           int
	Measured        map[string]map[string]float64 // by task: the measured values of its newest test, in their codes' own units
}

// Protection is the map around something, with the devices on it.
type Protection struct {
	*forms.ProtectionMap
	devices map[string]OnMap
	wired   []forms.Wired
}

// Device gives a device of the map; ok is false for an id the register does not hold.
func (p *Protection) Device(id string) (OnMap, bool) {
	d, ok := p.devices[id]
	return d, ok
}

// Cover gives how an outlet is protected on the day the map was read for.
func (p *Protection) Cover(id string) forms.Cover {
	return p.ProtectionMap.Cover(id, func(by string) string { return p.devices[by].Stands })
}

// Lost gives the devices TEST or RESET of one takes the power from, itself first; those with a critical load before all.
func (p *Protection) Lost(id string) []OnMap {
	return p.criticalFirst(append([]string{id}, p.Behind(id)...))
}

// Dead gives the devices that are dead while a circuit's breaker is off, those with a critical load first.
func (p *Protection) Dead(circuit string) []OnMap { return p.criticalFirst(p.OnCircuit(circuit)) }

// With gives the edges that would close a loop if these sources were said now, by device; "" takes a source away.
func (p *Protection) With(sources map[string]string) (loops []forms.Feed) {
	wired := slices.Clone(p.wired)
	for i := range wired {
		if source, said := sources[wired[i].ID]; said {
			wired[i].Source, wired[i].Clock = source, 1<<63
		}
	}
	for _, f := range forms.NewProtectionMap(wired).LeftOut() {
		if _, said := sources[f.Device]; said {
			loops = append(loops, f)
		}
	}
	return loops
}

func (p *Protection) criticalFirst(ids []string) []OnMap {
	out := make([]OnMap, 0, len(ids))
	for _, id := range ids {
		if d, ok := p.devices[id]; ok {
			out = append(out, d)
		}
	}
	slices.SortStableFunc(out, func(a, b OnMap) int { return cmp.Compare(uncritical(a), uncritical(b)) })
	return out
}

func uncritical(d OnMap) int {
	if d.Place.CriticalLoad == "" {
		return 1
	}
	return 0
}

// ProtectionOf reads the map around one device: what is ahead of it, what is behind it, and what else protects that.
func (v *View) ProtectionOf(device string, on forms.Day) (*Protection, error) {
	sv, d, err := v.findDevice(device)
	if err != nil {
		return nil, err
	}
	w := newWiring(v, sv)
	if err := w.behind(d.id); err != nil {
		return nil, err
	}
	return w.protection(on)
}

// wiring gathers the devices of one site that a map is made of.
type wiring struct {
	v     *View
	sv    *siteView
	all   map[id16]*onWire
	order []id16        // as they were met
	whole map[id16]bool // circuits every device of which is in all
	heads map[id16]bool // circuits every protecting device of which is in all
}

// onWire is a device as it was met.
type onWire struct {
	*deviceThing
	forms.Wired
	source  id16
	circuit id16
}

func newWiring(v *View, sv *siteView) *wiring {
	return &wiring{v: v, sv: sv, all: map[id16]*onWire{}, whole: map[id16]bool{}, heads: map[id16]bool{}}
}

// take adds a device; isNew is false where it was met before.
func (w *wiring) take(id id16) (d *onWire, isNew bool, err error) {
	if d := w.all[id]; d != nil {
		return d, false, nil
	}
	t, err := w.v.deviceThing(w.sv, id)
	if err != nil {
		return nil, false, err
	}
	d = &onWire{deviceThing: t, Wired: forms.Wired{ID: id.String(), Gone: true}}
	w.all[id] = d
	w.order = append(w.order, id)
	if t == nil || t.born == 0 {
		d.deviceThing = nil
		return d, true, nil
	}
	d.Kind = kindName([]byte(t.text("kind")))
	if d.Gone = t.value("#retired") != nil; d.Gone {
		return d, true, nil
	}
	if d.circuit = parseID(t.text("circuit")); d.circuit != (id16{}) {
		d.Circuit = d.circuit.String()
	}
	if named := parseID(t.text("fed_by")); named != (id16{}) {
		if d.source, err = w.v.standsFor(w.sv, named); err != nil {
			return nil, false, err
		}
		var rec id16
		d.Clock, rec = t.saidOf("fed_by")
		d.Wired.Source, d.Record = d.source.String(), rec.String()
	}
	return d, true, nil
}

// standsFor gives the device that stands where one stood: itself while in service, else what took its place, and so on;
// where nothing did, the last that is known of.
func (v *View) standsFor(sv *siteView, id id16) (id16, error) {
	for range 64 { // replaced so often, or in a ring
		t, err := v.deviceThing(sv, id)
		if err != nil || t == nil || t.value("#retired") == nil {
			return id, err
		}
		next := parseID(t.text("#with"))
		if next == (id16{}) {
			return id, nil
		}
		id = next
	}
	return id, nil
}

// behind gathers everything that is fed from some devices, and the devices themselves.
func (w *wiring) behind(ids ...id16) error {
	for todo := ids; len(todo) > 0; {
		id := todo[len(todo)-1]
		todo = todo[:len(todo)-1]
		d, _, err := w.take(id)
		if err != nil {
			return err
		}
		fed, err := w.fedFrom(id)
		if err != nil {
			return err
		}
		if !d.Gone && d.circuit != (id16{}) && forms.ProtectsCircuit(d.Kind) && !w.whole[d.circuit] {
			w.whole[d.circuit] = true
			on, err := w.onCircuit(d.circuit, false)
			if err != nil {
				return err
			}
			fed = append(fed, on...)
		}
		for _, next := range fed {
			if w.all[next] == nil {
				if _, _, err := w.take(next); err != nil {
					return err
				}
				todo = append(todo, next)
			}
		}
	}
	return nil
}

// fedFrom gives the devices in service whose source a device is: those that name it, or one whose place it took.
func (w *wiring) fedFrom(id id16) (out []id16, err error) {
	met := map[id16]bool{id: true}
	for todo := []id16{id}; len(todo) > 0; todo = todo[1:] {
		err := w.v.scan(bktFeed, feedKey(w.sv.ord, todo[0], 0)[:20], func(key, _ []byte) error {
			t, err := w.v.deviceNumbered(w.sv, read32(key[20:]))
			if err != nil || met[t.id] {
				return err
			}
			met[t.id] = true
			if t.value("#retired") != nil {
				todo = append(todo, t.id)
				return nil
			}
			if source, err := w.v.standsFor(w.sv, parseID(t.text("fed_by"))); err != nil || source != id || t.born == 0 {
				return err
			}
			out = append(out, t.id)
			return nil
		})
		if err != nil {
			return nil, err
		}
	}
	return out, nil
}

// onCircuit gives the devices of a circuit: those that protect all of it, or every one.
func (w *wiring) onCircuit(circuit id16, heads bool) (out []id16, err error) {
	prefix := circuitKey(w.sv.ord, circuit, false, 0)[:20]
	if heads {
		prefix = append(bytes.Clone(prefix), 0)
	}
	err = w.v.scan(bktCircuit, prefix, func(key, _ []byte) error {
		t, err := w.v.deviceNumbered(w.sv, read32(key[21:]))
		if err == nil && t.born != 0 {
			out = append(out, t.id)
		}
		return err
	})
	return out, err
}

// ahead adds everything the gathered devices hang on, so that what is gathered says all that is known of each.
func (w *wiring) ahead() error {
	for i := 0; i < len(w.order); i++ {
		d := w.all[w.order[i]]
		if d.source != (id16{}) {
			if _, _, err := w.take(d.source); err != nil {
				return err
			}
		}
		if d.circuit == (id16{}) || w.heads[d.circuit] || forms.ProtectsCircuit(d.Kind) {
			continue
		}
		w.heads[d.circuit] = true
		heads, err := w.onCircuit(d.circuit, true)
		if err != nil {
			return err
		}
		for _, h := range heads {
			if _, _, err := w.take(h); err != nil {
				return err
			}
		}
	}
	return nil
}

// protection makes the map of what was gathered: in the order along each circuit where somebody said one, then walking order.
func (w *wiring) protection(on forms.Day) (*Protection, error) {
	if err := w.ahead(); err != nil {
		return nil, err
	}
	p := &Protection{devices: make(map[string]OnMap, len(w.order))}
	list := make([]placedWire, 0, len(w.order))
	for _, id := range w.order {
		d := w.all[id]
		along, err := w.v.circuit(w.sv, d.circuit)
		if err != nil {
			return nil, err
		}
		row, err := w.row(d, on)
		if err != nil {
			return nil, err
		}
		if d.deviceThing != nil {
			p.devices[d.ID] = row
		}
		list = append(list, placedWire{d.Wired, row.Place, along.place(id)})
	}
	sortWalking(list, func(l placedWire) (Place, string) { return l.at, l.ID })
	slices.SortStableFunc(list, func(a, b placedWire) int { return cmp.Compare(a.along, b.along) })
	wired := make([]forms.Wired, len(list))
	for i := range list {
		wired[i] = list[i].Wired
	}
	p.wired, p.ProtectionMap = wired, forms.NewProtectionMap(wired)
	return p, nil
}

type placedWire struct {
	forms.Wired
	at    Place
	along int
}

func (w *wiring) row(d *onWire, on forms.Day) (OnMap, error) {
	if d.deviceThing == nil {
		return OnMap{}, nil
	}
	work, err := w.v.work(w.sv, d.n, false)
	if err != nil {
		return OnMap{}, err
	}
	row, err := w.v.row(w.sv, &d.thing, work, on)
	out := OnMap{DeviceRow: row, Source: d.Wired.Source, EquipmentGround: d.text("equipment_ground"), Faces: int(d.number("faces"))}
	if !d.Gone {
		out.Stands = stands(work, on)
	}
	if work == nil {
		return out, err
	}
	for _, t := range work.tasks {
		if len(t.numbers) == 0 || !w.v.scope.Shows(t.last.day) {
			continue
		}
		if out.Measured == nil {
			out.Measured = map[string]map[string]float64{}
		}
		out.Measured[t.task] = map[string]float64{}
		for _, f := range t.numbers {
			out.Measured[t.task][f.code] = f.value
		}
	}
	return out, err
}

// stands tells how a device stands as a protector.
func stands(w *work, on forms.Day) string {
	if w == nil {
		return forms.StandsUntested
	}
	passed := false
	for _, t := range w.tasks {
		if t.conclusive.result == codeFail {
			return forms.StandsFailed
		}
		passed = passed || t.conclusive.result != 0
	}
	if !passed {
		return forms.StandsUntested
	}
	for _, d := range w.dates {
		if d.State(on) == "overdue" {
			return forms.StandsOverdue
		}
	}
	return forms.StandsWell
}
