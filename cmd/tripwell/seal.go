package main

import (
	"encoding/json"
	"fmt"
	"net/http"
	"net/url"
	"strings"

	"tripwell/server"
	"tripwell/store"
)

type sealCmd struct {
	Record string `arg:"" help:"Id of the record, as its page shows it."`
	Reason string `required:"" help:"Why its bytes are dropped. Stays for good: write it without what must go."`
	DryRun bool   `name:"dry-run" help:"Say what sealing would do, and change nothing."`
	folder
}

// Help gives an example.
func (sealCmd) Help() string {
	return "Drops the bytes of one record for good, where they hold what concerns a person: a note, a photo. The hash of the record stays, so every proof still holds; a sealed test never counts as passed. Correct the test first. Lists are computed anew, which takes as long as the command rebuild; pages wait meanwhile.\n\nBackups, bundles and workbooks made before still hold the bytes.\n\nExample:\n\n    tripwell seal 01939c7e-0d2c-7a00-8c00-6f1d2c3b4a59 --reason \"The note named a tenant\" --data /srv/tripwell"
}

// Run seals and says what is left to do elsewhere.
func (c sealCmd) Run(e *env) error {
	return e.with(c.Data, func(d *door) error {
		var what store.Sealing
		body, err := d.get("/own/seal", url.Values{"id": {c.Record}})
		if err != nil {
			return err
		}
		defer body.Close()
		if err := json.NewDecoder(body).Decode(&what); err != nil {
			return fmt.Errorf("what sealing would do: %w", err)
		}
		if len(what.Restated) > 0 {
			fmt.Fprintf(e.stdout, "Stated anew, since only this record says so: %s.\n", strings.Join(what.Restated, ", "))
		}
		if c.DryRun {
			return c.dry(e, what)
		}
		var done store.SealDone
		if err := e.follow(d, http.MethodPost, "/own/seal", url.Values{"id": {c.Record}, "reason": {c.Reason}}, nil, "seal", &done); err != nil {
			return err
		}
		return c.tell(e, done)
	})
}

func (c sealCmd) dry(e *env, what store.Sealing) error {
	switch {
	case what.Sealed != nil:
		fmt.Fprintf(e.stdout, "It was sealed before: %s\n", what.Sealed.Reason)
	case what.First != "":
		fmt.Fprintln(e.stdout, what.First)
	default:
		fmt.Fprintf(e.stdout, "The %s of %s can be sealed; %d files go with it unless another record names them. Nothing was changed.\n", what.Kind, what.At.Format("2006-01-02 15:04"), len(what.Photos))
	}
	return nil
}

func (c sealCmd) tell(e *env, done store.SealDone) error {
	if done.Before {
		_, err := fmt.Fprintf(e.stdout, "It was sealed before: %s\n", done.Reason)
		return err
	}
	fmt.Fprintf(e.stdout, "Sealed. %d files were removed with it, but for those another record names.\n", done.Photos)
	if !done.Wiped {
		fmt.Fprintln(e.stdout, "Somebody is reading for long: what the file still holds in free pages is overwritten when the store is next opened, or by sealing again.")
	}
	if left := server.BooksBefore(c.Data); len(left) > 0 {
		fmt.Fprintf(e.stdout, "Still holding the bytes: %s. Delete them when they are not needed.\n", strings.Join(left, ", "))
	}
	_, err := fmt.Fprintln(e.stdout, "Backups, bundles and workbooks made before still hold the bytes: replace them. Phones drop their copies with the next signal.")
	return err
}
