package export

import (
	"context"
	"fmt"
	"net/url"
	"slices"
	"strings"

	"tripwell/static"
	"tripwell/store"
	"tripwell/store/record"
)

// LabelAsk says which labels.
type LabelAsk struct {
	Site    string   // id or code; "" = every site of the scope
	Devices []string // ids; empty = all
	URL     string   // label address of the store (https://host)
	Demo    bool
}

// LabelsOf reads the labels of a store within a scope, in walking order: of a site ("" = all), or of some devices of it.
func LabelsOf(s *store.Store, scope store.Scope, site string, devices ...string) (labels []Label, err error) {
	err = s.View(scope, func(v *store.View) error {
		labels, err = LabelsFromView(v, LabelAsk{Site: site, Devices: devices, URL: s.URL(), Demo: s.Demo()})
		return err
	})
	return labels, err
}

// LabelsFromView gives the labels of all devices in service that have a tag, in walking order.
func LabelsFromView(v *store.View, ask LabelAsk) ([]Label, error) {
	host, err := labelHost(ask.URL)
	if err != nil {
		return nil, err
	}
	sites, err := sitesOf(v, ask.Site)
	if err != nil {
		return nil, err
	}
	words, err := static.ReadWords("en")
	if err != nil {
		return nil, err
	}
	var labels []Label
	printed := map[string]bool{}
	for line, err := range deviceLines(v, sites) {
		if err != nil {
			return nil, err
		}
		d := line.Device
		wanted := len(ask.Devices) == 0 || slices.Contains(ask.Devices, d.ID)
		if wanted && d.Tag != "" && !d.Retired && !printed[d.Tag] {
			printed[d.Tag] = true // a tag names the place: two devices there share one label
			labels = append(labels, deviceLabel(d, line.Site.Name, host, words.Say("kind."+d.Kind), ask.Demo))
		}
	}
	return labels, nil
}

func deviceLabel(d store.DeviceRow, site, host, kind string, demo bool) Label {
	l := Label{Tag: d.Tag, Address: record.TagAddress("HTTPS://"+host, d.Tag), Spot: d.Place.Name, Context: roomText(d.Place), Kind: kind, Site: site, Demo: demo}
	switch {
	case d.Panel != "" && d.Circuit != "":
		l.Circuit = d.Panel + " / " + d.Circuit
	default:
		l.Circuit = d.Panel + d.Circuit
	}
	if l.Spot == "" { // a portable item: what it is, not where
		l.Spot = kind
	}
	if l.Context == "" {
		l.Context = joinSpace(d.Make, d.Model)
	}
	return l
}

func roomText(p store.Place) string {
	var parts []string
	for _, s := range []string{p.Room, p.Floor, p.Building} {
		if s != "" {
			parts = append(parts, s)
		}
	}
	return strings.Join(parts, " · ")
}

// BlankLabels draws n new tags, writes down that they were made, and gives their labels: printed before anybody knows
// where they go, bound on site by scanning.
func BlankLabels(ctx context.Context, s *store.Store, by string, n int) ([]Label, error) {
	host, err := labelHost(s.URL())
	if err != nil {
		return nil, err
	}
	tags, err := s.MintTags(ctx, by, n)
	if err != nil {
		return nil, err
	}
	labels := make([]Label, len(tags))
	for i, tag := range tags {
		labels[i] = Label{Tag: tag, Address: record.TagAddress("HTTPS://"+host, tag), Demo: s.Demo(), Blank: true}
	}
	return labels, nil
}

// LabelOf gives the label of a tag: of the device it leads to within the scope, or a blank one where it is bound to
// nothing there.
func LabelOf(s *store.Store, scope store.Scope, tag string) (l Label, err error) {
	code, ok := record.ParseTag(tag)
	if !ok {
		return l, &store.Error{Code: "invalid", Field: "tag", Text: fmt.Sprintf("%q is no tag: its check character does not fit. Read the label again.", cut(tag))}
	}
	err = s.View(scope, func(v *store.View) error {
		holders, err := v.Tag(code)
		if err != nil {
			return err
		}
		for _, h := range holders {
			if h.Device == "" {
				continue
			}
			labels, err := LabelsFromView(v, LabelAsk{Site: h.Site, Devices: []string{h.Device}, URL: s.URL(), Demo: s.Demo()})
			if err != nil {
				return err
			}
			for _, one := range labels {
				if one.Tag == code {
					l = one
					return nil
				}
			}
		}
		host, err := labelHost(s.URL())
		l = Label{Tag: code, Address: record.TagAddress("HTTPS://"+host, code), Demo: s.Demo(), Blank: true}
		return err
	})
	return l, err
}

// labelHost is the host (and port) of the label address, in upper case.
func labelHost(address string) (string, error) {
	if address == "" {
		return "", &store.Error{Code: "invalid", Field: "url", Text: "Labels need the address that phones will open: start the server once with --url https://your.host."}
	}
	u, err := url.Parse(address)
	if err != nil || !strings.EqualFold(u.Scheme, "https") || u.Host == "" || strings.Trim(u.Path, "/") != "" || u.RawQuery != "" || u.User != nil {
		return "", &store.Error{Code: "invalid", Field: "url", Text: "The address on labels must look like https://your.host, without a path; this store holds " + address + ". Start the server once with a better --url."}
	}
	return strings.ToUpper(u.Host), nil
}
