package store

import (
	"encoding/json"
	"strings"
)

// DeviceFields gives the merged register fields of every registered device of a site, by device id, in one pass.
func (v *View) DeviceFields(site string) (map[string]map[string]any, error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return nil, err
	}
	all := map[string]map[string]any{}
	err = v.each(sv, ofDevice, func(_ uint32, t *thing) error {
		fields := map[string]any{}
		for _, f := range t.fields {
			raw := present(f.value)
			if strings.HasPrefix(f.name, "#") || raw == nil {
				continue
			}
			var value any
			if err := json.Unmarshal(raw, &value); err != nil {
				return err
			}
			fields[f.name] = value
		}
		all[t.id.String()] = fields
		return nil
	})
	return all, err
}
