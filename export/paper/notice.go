package paper

import (
	"slices"

	"tripwell/forms"
	"tripwell/store"
)

// Notices are sheets to leave at rooms: what of a round could not be tested there, what failed, and a line for whom to call. One
// page a room.
type Notices struct {
	Site  store.Site
	Code  string // of the round
	Demo  bool
	Rooms []Notice
}

// Notice is what one room is told.
type Notice struct {
	Room    string // building, floor and room; "" where the register names none
	On      forms.Day
	Back    []NoticeLine
	Failing []NoticeLine
}

// NoticeLine is one test that could not be made, or one outlet that failed.
type NoticeLine struct {
	Spot, Kind, Task string
	Reason           string // code of a missing reason; "" where it failed or nobody said
}

// NoticesOf reads the notices of a round from a view: rooms where somebody must come back or where something failed, in walking order.
func NoticesOf(v *store.View, round string, demo bool) (Notices, error) {
	r, err := v.Round(round)
	if err != nil {
		return Notices{}, err
	}
	n := Notices{Code: r.Code, Demo: demo}
	if n.Site, err = v.Site(r.Site); err != nil {
		return n, err
	}
	for _, stop := range r.Stops {
		failed := stop.State == store.StopDone && stop.Result == forms.Fail
		if stop.Retired || !failed && stop.State != store.StopBack {
			continue
		}
		d, err := v.Device(stop.Device, stop.Day)
		if err != nil {
			continue // not in the register of this site: there is no room to leave a sheet at
		}
		line := NoticeLine{Spot: d.Place.Name, Kind: d.Kind, Task: stop.Task}
		if !failed && stop.Entry != "" {
			if line.Reason, err = reasonOf(v, stop.Entry); err != nil {
				return n, err
			}
		}
		n.add(d.Place.Context(), stop.Day, line, failed)
	}
	if len(n.Rooms) == 0 {
		return n, &store.Error{Code: "not_found", Field: "round", Text: "There is nothing to leave a notice for: on this round everything could be tested and nothing failed."}
	}
	return n, nil
}

func (n *Notices) add(room string, on forms.Day, line NoticeLine, failed bool) {
	at := slices.IndexFunc(n.Rooms, func(one Notice) bool { return one.Room == room })
	if at < 0 {
		at, n.Rooms = len(n.Rooms), append(n.Rooms, Notice{Room: room, On: on})
	}
	one := &n.Rooms[at]
	one.On = max(one.On, on)
	if failed {
		one.Failing = append(one.Failing, line)
		return
	}
	one.Back = append(one.Back, line)
}

// reasonOf gives the first reason an entry states for what was not read, in the order of their codes.
func reasonOf(v *store.View, entry string) (string, error) {
	e, err := v.Entry(entry)
	if err != nil {
		return "", err
	}
	var codes []string
	for code, r := range e.Body.Readings {
		if r.Missing != "" {
			codes = append(codes, code)
		}
	}
	if len(codes) == 0 {
		return "", nil
	}
	return e.Body.Readings[slices.Min(codes)].Missing, nil
}
