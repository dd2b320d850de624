package main

import (
	"encoding/json"
	"fmt"
	"io"
	"net/http"
	"os"

	"tripwell/server"
)

type importTrayCmd struct {
	folder
	File string `arg:"" placeholder:"FILE" help:"File a phone saved of what it had to send; - reads standard input."`
}

// Help gives an example.
func (importTrayCmd) Help() string {
	return "Takes in the file a phone saved of its tray, as if the phone had sent it. The same file a second time adds nothing. What is refused is kept aside with its reason.\n\nExample:\n\n    tripwell import tray tripwell-tray-2026-12-01.json --data /srv/tripwell"
}

// Run sends the file and prints what became of its records.
func (c importTrayCmd) Run(e *env) error {
	file := io.NopCloser(e.stdin)
	if c.File != "-" {
		f, err := os.Open(c.File)
		if err != nil {
			return usageError{fmt.Errorf("cannot read %s: %w", c.File, unwrapPath(err))}
		}
		file = f
	}
	defer file.Close()
	return e.with(c.Data, func(d *door) error {
		body, err := d.Ask(d.ctx, http.MethodPost, "/own/import/tray", nil, file)
		if err != nil {
			return wrongFlag(err)
		}
		defer body.Close()
		var report server.TrayReport
		if err := json.NewDecoder(body).Decode(&report); err != nil {
			return fmt.Errorf("import tray: %w", err)
		}
		fmt.Fprintf(e.stdout, "%d records of %s's phone, saved %s: %d new, %d were here, %d refused.\n", report.Records, report.Person, report.Made, report.Stored, report.Already, len(report.Refused))
		for _, r := range report.Refused {
			fmt.Fprintf(e.stderr, "%s: %s\n", r.ID, r.Text)
		}
		if report.Photos+len(report.NoPhoto) > 0 {
			fmt.Fprintf(e.stdout, "Photos: %d are here now, %d were not taken.\n", report.Photos, len(report.NoPhoto))
		}
		for _, p := range report.NoPhoto {
			fmt.Fprintf(e.stderr, "%s: %s\n", p.Name, p.Text)
		}
		if n := len(report.Refused); n > 0 {
			return fmt.Errorf("%d of %d records of %s were refused and are kept aside", n, report.Records, c.File)
		}
		return nil
	})
}
