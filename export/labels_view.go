package export

import (
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
			labels = append(labels, deviceLabel(d, host, words.Say("kind."+d.Kind), ask.Demo))
		}
	}
	return labels, nil
}

func deviceLabel(d store.DeviceRow, host, kind string, demo bool) Label {
	l := Label{Tag: d.Tag, Address: record.TagAddress("HTTPS://"+host, d.Tag), Spot: d.Place.Name, Context: roomText(d.Place), Demo: demo}
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
