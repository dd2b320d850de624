package main

import (
	"fmt"
	"io"
	"net/http"
	"net/url"

	"tripwell/store"
)

type checkCmd struct {
	folder
}

// Help gives an example.
func (checkCmd) Help() string {
	return "Reads the whole store: the file, every record against its place and its log's root, and all lists against the records. Exit code 1 when anything is wrong.\n\nExample:\n\n    tripwell check --data /srv/tripwell"
}

// Run checks and reports.
func (c checkCmd) Run(e *env) error {
	return e.with(c.Data, func(d *door) error {
		var report store.CheckReport
		if err := e.follow(d, http.MethodGet, "/own/check", nil, nil, "check", &report); err != nil {
			return err
		}
		fmt.Fprintf(e.stdout, "%d records in %d logs, %d refused and kept aside.\nLists %s\n", report.Records, report.Logs, report.Refused, report.ViewHash)
		if report.Head != "" {
			fmt.Fprintf(e.stdout, "\n%s", report.Head)
		}
		for _, p := range report.Problems {
			fmt.Fprintln(e.stdout, "Wrong:", p)
		}
		if n := len(report.Problems); n > 0 {
			return fmt.Errorf("the store in %s has %d problems. Do not write to it: copy the folder as it is, then restore the newest backup that passes its check", c.Data, n)
		}
		_, err := fmt.Fprintln(e.stdout, "Nothing is wrong.")
		return err
	})
}

// follow runs something long on the store with a bar on the terminal.
func (e *env) follow(d *door, method, path string, query url.Values, body io.Reader, what string, report any) error {
	bar := e.progress(what)
	defer bar.finish()
	return wrongFlag(d.Follow(e.ctx, method, path, query, body, bar.set, report))
}
