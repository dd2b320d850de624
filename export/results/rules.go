package results

import (
	"maps"
	"strings"

	"tripwell/export/paper"
	"tripwell/forms"
	"tripwell/store"
)

// rules are the forms, limit sets and instruments a file is read under.
type rules struct {
	v           *store.View
	forms       map[string]*forms.Form
	org         []*forms.LimitSet
	sites       map[string][]*forms.LimitSet
	instruments []store.Instrument
}

func readRules(v *store.View) (*rules, error) {
	ru := &rules{v: v, forms: map[string]*forms.Form{}, sites: map[string][]*forms.LimitSet{}}
	list, err := v.Forms()
	if err != nil {
		return nil, err
	}
	for _, f := range list {
		ru.forms[f.ID] = f
	}
	if ru.org, err = v.LimitSets(); err != nil {
		return nil, err
	}
	ru.instruments, err = v.Instruments()
	return ru, err
}

// ownColumns are the columns of checks an organisation added, by the headings round sheets print above them. A heading that
// forms give different checks is left to the person who knows the file.
func (ru *rules) ownColumns() (map[string]column, error) {
	own, several := map[string]column{}, map[string]bool{}
	for _, f := range ru.forms {
		cols, err := paper.Columns(f)
		if err != nil {
			return nil, err
		}
		for _, c := range cols {
			if !forms.IsOwn(c.Reading) {
				continue
			}
			heading := strings.ToLower(strings.Join(strings.Fields(c.Header), " "))
			if had, ok := own[heading]; ok && had.reading != c.Reading {
				several[heading] = true
			}
			col := column{reading: c.Reading, unit: c.Unit, options: maps.Clone(c.Options)}
			maps.Copy(col.options, own[heading].options)
			own[heading] = col
		}
	}
	maps.DeleteFunc(own, func(heading string, _ column) bool { return several[heading] })
	return own, nil
}

// limitSet gives the revision in force on a day: the site's own before the organisation's; nil where there was none.
func (ru *rules) limitSet(site, id string, on forms.Day) (*forms.LimitSet, error) {
	own, ok := ru.sites[site]
	if !ok {
		var err error
		if own, err = ru.v.SiteLimitSets(site); err != nil {
			return nil, err
		}
		ru.sites[site] = own
	}
	for _, list := range [][]*forms.LimitSet{own, ru.org} {
		var in *forms.LimitSet
		for _, s := range list {
			if s.ID == id && s.InForce <= on && (in == nil || s.InForce >= in.InForce) {
				in = s
			}
		}
		if in != nil {
			return in, nil
		}
	}
	return nil, nil
}

// limitSetOf gives the set a device's test is judged under: the device's own, its kind's, or the form's.
func (ru *rules) limitSetOf(d *device, form *forms.Form, on forms.Day) (*forms.LimitSet, error) {
	own, _ := d.Fields["limit_set"].(string)
	for _, id := range []string{own, forms.DefaultLimitSet(d.Kind, flag(d.Fields["delayed"])), form.LimitSet} {
		if id == "" {
			continue
		}
		if set, err := ru.limitSet(d.Site, id, on); set != nil || err != nil {
			return set, err
		}
	}
	return nil, nil
}

// instrument finds an instrument by its name or serial.
func (ru *rules) instrument(text string) (*store.Instrument, string) {
	text = strings.Join(strings.Fields(text), " ")
	var found *store.Instrument
	for i := range ru.instruments {
		in := &ru.instruments[i]
		if in.ID != text && !strings.EqualFold(in.Name, text) && (in.Serial == "" || !strings.EqualFold(in.Serial, text)) {
			continue
		}
		if found != nil {
			return nil, "Several instruments are called this. Write the serial."
		}
		found = in
	}
	if found == nil {
		return nil, "There is no such instrument here. Register it under instruments, or write its name or serial as it stands there."
	}
	return found, ""
}

// given is what the judgement needs to know of device and instrument, as the phone puts it into an entry.
func (d *device) given(form *forms.Form, set *forms.LimitSet, in *store.Instrument) forms.Given {
	circuit, _ := d.Fields["circuit"].(string)
	supply, _ := d.site.supply[circuit].(string)
	g := forms.GivenOf(d.Kind, d.Fields, supply)
	g.FormRev = form.Revision
	if set != nil {
		g.LimitSet, g.LimitRev = set.ID, set.Revision
	}
	if in != nil {
		in.Tell(&g)
	}
	return g
}

func flag(v any) bool { return v == true || v == "yes" || v == "true" }
