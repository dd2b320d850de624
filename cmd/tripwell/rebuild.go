package main

import (
	"fmt"
	"net/http"

	"tripwell/server"
)

type rebuildCmd struct {
	folder
}

// Help gives an example.
func (rebuildCmd) Help() string {
	return "Computes all lists and pages anew from the records. The records themselves stay as they are. Stop the server first.\n\nExample:\n\n    tripwell rebuild --data /srv/tripwell"
}

// Run rebuilds and prints the hash over the lists.
func (c rebuildCmd) Run(e *env) error {
	return e.with(c.Data, func(d *door) error {
		var report server.Rebuilt
		if err := e.follow(d, http.MethodPost, "/own/rebuild", nil, nil, "rebuild", &report); err != nil {
			return err
		}
		_, err := fmt.Fprintf(e.stdout, "Rebuilt. Lists %s\n", report.ViewHash)
		return err
	})
}
