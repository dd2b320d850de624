package paper

import (
	"fmt"
	"net/url"
	"slices"
	"strings"

	"tripwell/export"
	"tripwell/forms"
	"tripwell/static"
	"tripwell/store"
	"tripwell/store/record"
)

// Round is a list of tests in walking order.
type Round struct {
	Site  store.Site
	On    forms.Day // the day the list was made
	Until forms.Day // last due day on the list; NoDay: every device that has the task
	Task  string    // "" = all tasks
	Demo  bool
	Code  string // of a round made in the office, which its rows come back with; "" for a list of what is due
	// Address opens that round on a phone; "" where there is none.
	Address string
	Stops   []Stop
}

// Stop is one test of one device.
type Stop struct {
	Device  store.DeviceRow
	Task    string
	Due     forms.Day // NoDay where no plan covers it
	Late    bool
	Address string // of the label, "" where there is none
	Form    *forms.Form
	Columns []Column // what is asked of this device when all goes well, in order
}

// RoundAsk says which tests.
type RoundAsk struct {
	Site  string    // id or code
	Round string    // id of a round made in the office: its stops, in its order, and nothing else is asked
	Task  string    // "" = all
	Until forms.Day // NoDay: every device that has the task, due or not
	On    forms.Day // today at the site where it is NoDay
	URL   string    // label address of the store; "" = no codes
	Demo  bool
}

// RoundOf reads a round from a view.
func RoundOf(v *store.View, now forms.Day, ask RoundAsk) (Round, error) {
	r := Round{On: now, Until: ask.Until, Task: ask.Task, Demo: ask.Demo}
	if ask.Task != "" && !slices.Contains(forms.Tasks(), ask.Task) {
		return r, &store.Error{Code: "invalid", Field: "task", Text: fmt.Sprintf("There is no task %q. Choose one of: %s.", ask.Task, strings.Join(forms.Tasks(), ", "))}
	}
	site, err := v.Site(ask.Site)
	if err != nil {
		return r, err
	}
	r.Site = site
	if ask.Round != "" {
		return r, r.made(v, ask)
	}
	asked, err := newAsking(v, site.ID)
	if err != nil {
		return r, err
	}
	for d, err := range v.Devices(site.ID) {
		if err != nil {
			return r, err
		}
		if d.Retired {
			continue
		}
		for _, task := range forms.Tasks() {
			if ask.Task != "" && task != ask.Task {
				continue
			}
			stop, ok, err := asked.stop(v, d, task, ask)
			if err != nil {
				return r, err
			}
			if ok {
				r.Stops = append(r.Stops, stop)
			}
		}
	}
	if len(r.Stops) == 0 {
		return r, &store.Error{Code: "not_found", Field: "site", Text: "There is nothing to test on this round: no device here has such a date. Choose a later day or another test."}
	}
	return r, nil
}

// made fills the stops of a round made in the office: what is not done yet.
func (r *Round) made(v *store.View, ask RoundAsk) error {
	round, err := v.Round(ask.Round)
	if err != nil {
		return err
	}
	asked, err := newAsking(v, round.Site)
	if err != nil {
		return err
	}
	r.Code, r.Until = round.Code, round.Until
	if ask.URL != "" {
		r.Address = strings.TrimSuffix(ask.URL, "/") + "/field#/round/" + url.PathEscape(r.Site.Code) + "/" + round.ID
	}
	every := RoundAsk{Until: forms.NoDay, On: ask.On, URL: ask.URL}
	for _, s := range round.Stops {
		if s.State == store.StopDone || s.Retired {
			continue
		}
		d, err := v.Device(s.Device, ask.On)
		if err != nil {
			continue // not in the register of this site: nothing can be asked of it
		}
		stop, ok, err := asked.stop(v, d.DeviceRow, s.Task, every)
		if err != nil {
			return err
		}
		if ok {
			r.Stops = append(r.Stops, stop)
		}
	}
	if len(r.Stops) == 0 {
		return &store.Error{Code: "not_found", Field: "round", Text: "Nothing of this round is left to test. Look at its page for what was done."}
	}
	return nil
}

// asking knows what the forms ask of a device.
type asking struct {
	forms  []*forms.Form
	supply map[string]string // by circuit id
}

func newAsking(v *store.View, site string) (*asking, error) {
	list, err := v.Forms()
	if err != nil {
		return nil, err
	}
	circuits, err := v.Circuits(site)
	if err != nil {
		return nil, err
	}
	a := &asking{forms: list, supply: map[string]string{}}
	for _, c := range circuits {
		a.supply[c.ID], _ = c.Fields["supply"].(string)
	}
	return a, nil
}

func (a *asking) stop(v *store.View, d store.DeviceRow, task string, ask RoundAsk) (Stop, bool, error) {
	s := Stop{Device: d, Task: task, Due: forms.NoDay}
	for _, due := range d.Due {
		if due.Task == task {
			s.Due, s.Late = due.Due, due.State == "overdue"
		}
	}
	if ask.Until != forms.NoDay && (s.Due == forms.NoDay || s.Due > ask.Until) {
		return s, false, nil
	}
	for _, f := range a.forms {
		if f.Task == task && slices.Contains(f.Kinds, d.Kind) {
			s.Form = f
		}
	}
	if s.Form == nil {
		return s, false, nil
	}
	if ask.URL != "" && d.Tag != "" {
		s.Address = record.TagAddress(strings.ToUpper(ask.URL), d.Tag)
	}
	whole, err := v.Device(d.ID, ask.On)
	if err != nil {
		return s, false, err
	}
	s.Columns, err = a.columns(s.Form, whole)
	return s, true, err
}

// columns leaves out what the register already rules out: a question about a second face, an injection without a ground.
func (a *asking) columns(form *forms.Form, d store.Device) ([]Column, error) {
	all, err := Columns(form)
	if err != nil {
		return nil, err
	}
	entry := forms.Entry{Form: form.ID, Given: a.given(d), Readings: inOrder}
	open := map[string]bool{}
	for _, ask := range form.Asked(nil, entry) {
		open[ask.Reading] = true
	}
	return slices.DeleteFunc(all, func(c Column) bool {
		return c.Quick == nil && (!open[c.Reading] || !holds(c.when, entry))
	}), nil
}

// inOrder are the answers on the way through a form when nothing is wrong; paper cannot hide a question that an answer
// makes needless, so it asks what a sound device is asked.
var inOrder = map[string]forms.Reading{
	"condition": {Value: "sound"}, "found": {Value: "on"}, "wiring": {Value: "correct"}, "ground_continuous": {Value: "yes"},
	"button_trips": {Value: "yes"}, "load_dead_when_tripped": {Value: "yes"}, "button_resets": {Value: "yes"},
}

// holds asks the form's own rules whether conditions are met, through a form of one question.
func holds(when []forms.Condition, e forms.Entry) bool {
	if len(when) == 0 {
		return true
	}
	one := &forms.Form{ID: e.Form, Steps: []forms.Step{{Asks: []forms.Ask{{Reading: "restored", When: when}}}}}
	return len(one.Asked(nil, e)) > 0
}

// given is what the register says of a device, as an entry would carry it.
func (a *asking) given(d store.Device) forms.Given {
	circuit, _ := d.Fields["circuit"].(string)
	return forms.GivenOf(d.Kind, d.Fields, a.supply[circuit])
}

// title says what the round is: its task and until when.
func (r *Round) title(words *static.Words) string {
	task := words.Say("paper.round.all_tasks")
	if r.Task != "" {
		task = words.Say("task." + r.Task)
	}
	if r.Until == forms.NoDay {
		return task
	}
	return words.Say("paper.round.until", "task", task, "day", r.Until)
}

func (s *Stop) circuit() string {
	if s.Device.Panel != "" && s.Device.Circuit != "" {
		return s.Device.Panel + " / " + s.Device.Circuit
	}
	return s.Device.Panel + s.Device.Circuit
}

// spot is what the device is called on paper.
func (s *Stop) spot(words *static.Words) string {
	if s.Device.Place.Name != "" {
		return s.Device.Place.Name
	}
	return words.Say("kind." + s.Device.Kind)
}

// lead gives the cell of a leading column, as a worksheet holds it.
func (s *Stop) lead(words *static.Words, about string) string {
	switch about {
	case AboutTag:
		return export.TagText(s.Device.Tag)
	case AboutPlace:
		return export.PlaceText(s.Device.Place)
	case AboutKind:
		return words.Say("kind." + s.Device.Kind)
	case AboutCircuit:
		return s.circuit()
	case AboutTask:
		return words.Say("task." + s.Task)
	}
	return ""
}

// clean leaves what fits into a cell and onto a line.
func clean(s string) string { return export.Printable(s) }
