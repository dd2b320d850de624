package main

import (
	"fmt"
	"log/slog"
	"os"
	"path/filepath"
	"time"

	"tripwell/store"
)

type restoreCmd struct {
	folder
	File   string `arg:"" placeholder:"FILE" help:"Backup to put in place."`
	Photos string `name:"photos" placeholder:"FOLDER" help:"Folder that backup wrote photos to; those the store lacks are copied from it."`
}

// Help gives an example.
func (restoreCmd) Help() string {
	return "Puts a backup in the place of the book, once it was checked whole. Stop the server first. The book that stood there is kept beside it. When the server runs again, phones send by themselves what they still keep and the backup does not hold. On a new machine, put the copy of DIR/keys back first.\n\nExample:\n\n    tripwell restore /mnt/other-disk/tripwell-2026-12-01.db --photos /mnt/other-disk/photos --data /srv/tripwell"
}

// Run puts the book in place, then what photos it lacks, and says what else there is to do.
func (c restoreCmd) Run(e *env) error {
	if _, err := os.Stat(c.File); err != nil {
		return usageError{fmt.Errorf("cannot read %s: %w", c.File, unwrapPath(err))}
	}
	bar := e.progress("check")
	done, err := store.Restore(e.ctx, c.Data, c.File, store.Options{Now: time.Now, Log: logTo(e, slog.LevelWarn)}, bar.set)
	bar.finish()
	if err != nil {
		return err
	}
	fmt.Fprintf(e.stdout, "Restored: %d records in %d logs, as epoch %d. Nothing is wrong with them.\n", done.Records, done.Logs, done.Epoch)
	if done.Before != "" {
		fmt.Fprintf(e.stdout, "The book that stood there is kept as %s.\n", done.Before)
	}
	if done.Head != "" {
		fmt.Fprintf(e.stdout, "The head that was signed last is kept as %s; show it to whoever asks what became of it.\n", done.Head)
	}
	for _, log := range done.Shorter {
		fmt.Fprintf(e.stdout, "%s: %d records were signed, %d are here; phones send again what they keep.\n", log.Log, log.Signed, log.Here)
	}
	if done.NoKeys {
		fmt.Fprintf(e.stdout, "There is no signing key in %s: put the copy of that folder back before the server starts, else a new key signs from here on.\n", filepath.Join(c.Data, "keys"))
	}
	if c.Photos == "" {
		return nil
	}
	report, err := store.RestorePhotos(c.Data, c.Photos)
	if err != nil {
		return err
	}
	fmt.Fprintf(e.stdout, "Photos: %d copied, %d were there.\n", report.Copied, report.Had)
	if len(report.Damaged) > 0 {
		return fmt.Errorf("%d photos in %s are not what their names say and were left out, the first is %s", len(report.Damaged), c.Photos, report.Damaged[0])
	}
	return nil
}
