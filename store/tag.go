package store

import (
	"bytes"
	"cmp"
	"slices"

	"tripwell/store/record"
)

// TagHolder is one live binding of a tag: a place (with its present device) or a portable item.
type TagHolder struct {
	Subject, Site, Device string
}

// Tag gives the live bindings of a tag within the scope, by site and subject; none for a tag nobody holds. Two bindings
// are both given: people decide. The tag is read as people write and scan it.
func (v *View) Tag(tag string) ([]TagHolder, error) {
	tag, ok := record.ParseTag(tag)
	if !ok {
		return nil, &Error{Code: "invalid", Field: "tag", Text: "This is no tag: its check character does not fit. Read the label again."}
	}
	out := []TagHolder{}
	prefix := []byte(tag)
	c := v.tx.Bucket(bktTag).Cursor()
	for k, _ := c.Seek(prefix); k != nil && bytes.HasPrefix(k, prefix); k, _ = c.Next() {
		sv, ok, err := v.openOrd(read32(k[7:]))
		if err != nil {
			return nil, err
		}
		if !ok {
			continue
		}
		subject := id16(k[11:27])
		device, err := v.present(sv, subject)
		if err != nil {
			return nil, err
		}
		out = append(out, TagHolder{Subject: subject.String(), Site: sv.ID, Device: device})
	}
	slices.SortFunc(out, func(a, b TagHolder) int {
		return cmp.Or(cmp.Compare(a.Site, b.Site), cmp.Compare(a.Subject, b.Subject))
	})
	return out, nil
}

// present gives the device a subject of a tag stands for: the portable item itself, or the device at the place now, ""
// for none. Where two are at a place, the one registered later is there now.
func (v *View) present(sv *siteView, subject id16) (string, error) {
	if d, err := v.deviceThing(sv, subject); err != nil || d != nil {
		return subject.String(), err
	}
	all, err := v.placeDevices(sv, subject)
	if err != nil {
		return "", err
	}
	var now *deviceThing
	for _, d := range all {
		if d.value("#retired") == nil && (now == nil || now.older(&d.thing)) {
			now = d
		}
	}
	if now == nil {
		return "", nil
	}
	return now.id.String(), nil
}

// tagClash gives the other live bindings of a device's tag.
func (v *View) tagClash(sv *siteView, tag string, device id16) ([]string, error) {
	if tag == "" {
		return nil, nil
	}
	holders, err := v.Tag(tag)
	if err != nil {
		return nil, err
	}
	d, err := v.deviceThing(sv, device)
	if err != nil || d == nil {
		return nil, err
	}
	place, err := v.placeIDOf(sv, &d.thing)
	if err != nil {
		return nil, err
	}
	var out []string
	for _, h := range holders {
		if h.Subject != device.String() && h.Subject != place.String() {
			out = append(out, h.Subject)
		}
	}
	return out, nil
}
