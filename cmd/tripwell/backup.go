package main

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"io"
	"net/http"
	"net/url"

	"tripwell/store"
)

type backupCmd struct {
	folder
	outFile
}

// Help gives an example.
func (backupCmd) Help() string {
	return "Writes a checked copy of the book (records, lists, people) to one file, beside a running server or without one. Phones are told which records it covers and need not keep those longer than two weeks. The keys are not in it: copy DIR/keys once, to another place.\n\nExample:\n\n    tripwell backup -o /mnt/other-disk/tripwell-2026-12-01.db --data /srv/tripwell"
}

// Run writes the file, makes sure that it came whole, and only then has it noted.
func (c backupCmd) Run(e *env) error {
	if c.Output == "-" {
		return usageError{fmt.Errorf("a backup goes to a file: name one with -o, so that it can be noted when it is safe")}
	}
	return e.with(c.Data, func(d *door) error {
		var image store.Image
		if err := e.follow(d, http.MethodPost, "/own/backup", nil, nil, "check", &image); err != nil {
			return err
		}
		asked := url.Values{"sha256": {image.SHA256}}
		if err := c.write(e, func(w io.Writer) error { return takeImage(e, d, asked, image, w) }); err != nil {
			return err
		}
		kept, err := d.Ask(d.ctx, http.MethodPost, "/own/backup/kept", asked, nil)
		if err != nil {
			return err
		}
		defer kept.Close()
		records := int64(0)
		for _, n := range image.Logs {
			records += n
		}
		_, err = fmt.Fprintf(e.stdout, "%s: %d records in %d logs, %d bytes, SHA-256 %s. Nothing is wrong with it.\n", c.Output, records, len(image.Logs), image.Size, image.SHA256)
		return err
	})
}

func takeImage(e *env, d *door, asked url.Values, image store.Image, w io.Writer) error {
	body, err := d.get("/own/backup", asked)
	if err != nil {
		return err
	}
	defer body.Close()
	h := sha256.New()
	if err := copyOut(e, io.MultiWriter(w, h), body, "backup"); err != nil {
		return err
	}
	if hex.EncodeToString(h.Sum(nil)) != image.SHA256 {
		return fmt.Errorf("the backup did not come whole. Nothing was written; start it again")
	}
	return nil
}
