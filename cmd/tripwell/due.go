package main

import (
	"net/url"
)

type dueCmd struct {
	folder
	On   dayFlag `name:"on" placeholder:"DATE" help:"Day for which to say what is due, as 2026-12-31; today when left out."`
	Site string  `name:"site" placeholder:"CODE" help:"Only this site."`
	JSON bool    `name:"json" help:"One JSON object a line: device, tag, site, place, task, due, state, last."`
}

// Help gives an example.
func (dueCmd) Help() string {
	return "Lists the dates that are due or overdue on a day, oldest first.\n\nExample:\n\n    tripwell due --data /srv/tripwell --on 2026-12-31 --site KILN-LANE"
}

// Run prints the list.
func (c dueCmd) Run(e *env) error {
	d, err := e.openDoor(c.Data)
	if err != nil {
		return err
	}
	defer d.close()
	query := url.Values{}
	setIf(query, "on", c.On.text())
	setIf(query, "site", c.Site)
	if c.JSON {
		query.Set("json", "1")
	}
	return d.print(e, "/owner/due", query)
}

func setIf(q url.Values, name, value string) {
	if value != "" {
		q.Set(name, value)
	}
}
