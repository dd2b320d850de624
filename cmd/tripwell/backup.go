package main

import (
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"net/http"
	"net/url"
	"os"

	"tripwell/server"
	"tripwell/store"
)

type backupCmd struct {
	folder
	outFile
	Photos string `name:"photos" placeholder:"FOLDER" help:"Also copy photos to this folder, those it lacks; one folder serves all backups."`
}

// Help gives an example.
func (backupCmd) Help() string {
	return "Writes a checked copy of the book (records, lists, people) to one file, beside a running server or without one. Phones are told which records it covers and need not keep those longer than two weeks. Photos go to a folder of their own, where each is written once. The keys are in neither: copy DIR/keys once, to another place.\n\nExample:\n\n    tripwell backup -o /mnt/other-disk/tripwell-2026-12-01.db --photos /mnt/other-disk/photos --data /srv/tripwell"
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
		fmt.Fprintf(e.stdout, "%s: %d records in %d logs, %d bytes, SHA-256 %s. Nothing is wrong with it.\n", c.Output, records, len(image.Logs), image.Size, image.SHA256)
		if c.Photos == "" {
			return nil
		}
		return c.photos(e, d)
	})
}

// photos copies what photos the folder lacks. One that went bad on the server's disk is named and holds up no other.
func (c backupCmd) photos(e *env, d *door) error {
	lines, err := d.get("/own/photos", nil)
	if err != nil {
		return err
	}
	defer lines.Close()
	copied, had, bad := 0, 0, 0
	for dec := json.NewDecoder(lines); dec.More(); {
		var line server.PhotoLine
		if err := dec.Decode(&line); err != nil {
			return fmt.Errorf("the list of photos broke off: %w", err)
		}
		was, err := c.photo(d, line.Name)
		var refused *store.Error
		switch {
		case errors.As(err, &refused):
			fmt.Fprintf(e.stderr, "%s: %s\n", line.Name, refused.Text)
			bad++
		case err != nil:
			return err
		case was:
			had++
		default:
			copied++
		}
	}
	fmt.Fprintf(e.stdout, "Photos: %d copied to %s, %d were there.\n", copied, c.Photos, had)
	if bad > 0 {
		return fmt.Errorf("%d photos could not be copied; they are named above", bad)
	}
	return nil
}

func (c backupCmd) photo(d *door, name string) (had bool, err error) {
	if raw, err := os.ReadFile(store.PhotoFile(c.Photos, name)); err == nil {
		if sum := sha256.Sum256(raw); hex.EncodeToString(sum[:]) == name {
			return true, nil
		}
	}
	body, err := d.get("/own/photos/"+name, nil)
	if err != nil {
		return false, err
	}
	defer body.Close()
	raw, err := io.ReadAll(body)
	if err != nil {
		return false, fmt.Errorf("photo %s broke off: %w", name, err)
	}
	return store.PutPhoto(c.Photos, name, raw)
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
