package main

import (
	"bufio"
	"encoding/json"
	"fmt"
	"io"
	"net/url"
	"text/tabwriter"

	"tripwell/server"
	"tripwell/static"
)

type dueCmd struct {
	folder
	On   dayFlag `name:"on" placeholder:"DATE" help:"Day for which to say what is due, as 2026-12-31; today when left out."`
	Site string  `name:"site" placeholder:"CODE" help:"Only this site."`
	JSON bool    `name:"json" help:"One JSON object a line: device, tag, site, place, task, due, state, last."`
}

// Help gives an example.
func (dueCmd) Help() string {
	return "Lists the dates that are due or overdue on a day, oldest first within each site.\n\nExample:\n\n    tripwell due --data /srv/tripwell --on 2026-12-31 --site KILN-LANE"
}

// Run prints the list.
func (c dueCmd) Run(e *env) error {
	query := url.Values{}
	setIf(query, "on", c.On.text())
	setIf(query, "site", c.Site)
	return e.with(c.Data, func(d *door) error {
		lines, err := d.get("/own/due", query)
		if err != nil {
			return err
		}
		defer lines.Close()
		if c.JSON {
			if _, err := io.Copy(e.stdout, lines); err != nil {
				return fmt.Errorf("list of dates: %w", err)
			}
			return nil
		}
		return printDue(e.stdout, lines)
	})
}

// printDue writes the lines as a table for people.
func printDue(out io.Writer, lines io.Reader) error {
	words, err := static.ReadWords("en")
	if err != nil {
		return err
	}
	w := bufio.NewWriter(out)
	table := tabwriter.NewWriter(w, 0, 4, 2, ' ', 0)
	dec := json.NewDecoder(lines)
	n := 0
	for ; dec.More(); n++ {
		var line server.DueLine
		if err := dec.Decode(&line); err != nil {
			return fmt.Errorf("list of dates: %w", err)
		}
		last := "never"
		if line.Last != nil {
			last = line.Last.String()
		}
		fmt.Fprintf(table, "%s\t%s\t%s\t%s\t%s\t%s\tlast %s\n", line.Due, words.Say("state."+line.State), words.Say("task."+line.Task), line.Site, shownTag(line.Tag), line.Place, last)
	}
	if n == 0 {
		fmt.Fprintln(table, "Nothing is due.")
	}
	if err := table.Flush(); err != nil {
		return err
	}
	return w.Flush()
}

// shownTag writes a tag as its label does, with plain hyphens that can be copied into a search.
func shownTag(tag string) string {
	if len(tag) != 7 {
		return tag
	}
	return tag[:3] + "-" + tag[3:6] + "-" + tag[6:]
}
