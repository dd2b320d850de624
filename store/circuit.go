package store

import "encoding/json"

// Panel is a panel (distribution board) of a site.
type Panel struct{ ID, Name string }

// Circuit is one circuit of a site with its merged fields (breaker_a, conductor, supply …).
type Circuit struct {
	ID, PanelID, Panel, Numbers string
	Fields                      map[string]any
}

// Panels gives a site's panels, in the order they were first met.
func (v *View) Panels(site string) (panels []Panel, err error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return nil, err
	}
	err = v.each(sv, ofPanel, func(_ uint32, t *thing) error {
		panels = append(panels, Panel{t.id.String(), t.text("name")})
		return nil
	})
	return panels, err
}

// Circuits gives a site's circuits, in the order they were first met.
func (v *View) Circuits(site string) (circuits []Circuit, err error) {
	sv, err := v.siteNamed(site)
	if err != nil {
		return nil, err
	}
	if err := v.loadSite(sv); err != nil {
		return nil, err
	}
	err = v.each(sv, ofCircuit, func(_ uint32, t *thing) error {
		named, err := v.circuitOf(sv, t)
		if err != nil {
			return err
		}
		c := Circuit{ID: t.id.String(), PanelID: t.text("panel"), Panel: named.panel, Numbers: named.numbers, Fields: map[string]any{}}
		for _, f := range t.fields {
			var value any
			if raw := present(f.value); raw != nil && json.Unmarshal(raw, &value) == nil {
				c.Fields[f.name] = value
			}
		}
		circuits = append(circuits, c)
		return nil
	})
	return circuits, err
}
