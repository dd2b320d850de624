package store

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"
	"time"

	"go.etcd.io/bbolt"
)

// Image is a checked copy of the book that waits to be taken away. Logs says how many records of each log it holds.
type Image struct {
	Path   string // a file beside the book; Discard removes it
	Size   int64
	SHA256 string // hexadecimal
	Logs   map[string]int64
}

// Discard removes the file.
func (i Image) Discard() error { return os.Remove(i.Path) }

// CheckedImage copies the book as it stands at one moment and checks the copy: structure, leaves, roots, and the read
// models against a rebuild. The check works on a copy of the copy, for it writes; there must be room for two. A book in
// which anything is wrong gives no image.
func (s *Store) CheckedImage(ctx context.Context, progress func(done, total int64)) (image Image, err error) {
	if progress == nil {
		progress = func(done, total int64) {}
	}
	if image.Path, err = s.imageBeside(); err != nil {
		return image, errors.Join(err, removeIf(image.Path))
	}
	defer func() {
		if err != nil {
			err = errors.Join(err, os.Remove(image.Path))
		}
	}()
	trial := image.Path + ".trial" // leftovers finds it too
	defer os.Remove(trial)
	if image.Size, image.SHA256, err = copyFile(trial, image.Path); err != nil {
		return image, fmt.Errorf("back up: %w", err)
	}
	var report CheckReport
	if err := s.checkImage(ctx, trial, &report, progress); err != nil {
		return image, err
	}
	if len(report.Problems) > 0 {
		return image, &Error{Code: "conflict", Text: "The book is damaged, so it was not backed up: " + report.Problems[0] + " Keep the backups you have and run the check."}
	}
	image.Logs, err = logSizes(image.Path)
	return image, err
}

func removeIf(path string) error {
	if path == "" {
		return nil
	}
	return os.Remove(path)
}

func copyFile(to, from string) (n int64, sum string, err error) {
	in, err := os.Open(from)
	if err != nil {
		return 0, "", err
	}
	defer in.Close()
	out, err := os.OpenFile(to, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o600)
	if err != nil {
		return 0, "", err
	}
	h := sha256.New()
	n, err = io.Copy(io.MultiWriter(out, h), in)
	return n, hex.EncodeToString(h.Sum(nil)), errors.Join(err, out.Close())
}

func logSizes(path string) (sizes map[string]int64, err error) {
	db, err := bbolt.Open(path, 0o600, &bbolt.Options{ReadOnly: true, Timeout: time.Second})
	if err != nil {
		return nil, fmt.Errorf("back up: %w", err)
	}
	defer func() { err = errors.Join(err, db.Close()) }()
	err = db.View(func(tx *bbolt.Tx) error {
		heads, err := logHeads(tx)
		sizes = make(map[string]int64, len(heads))
		for _, h := range heads {
			sizes[h.Log] = h.Size
		}
		return err
	})
	return sizes, err
}

// NoteBackup keeps how much of each log a backup holds that is safe elsewhere: phones ask before they drop what they keep.
func (s *Store) NoteBackup(ctx context.Context, logs map[string]int64) error {
	return s.do(ctx, 1, func(g *group) error {
		had, err := backedUp(g.tx)
		if err != nil {
			return err
		}
		for log, size := range had {
			logs[log] = max(logs[log], size)
		}
		return g.putJSON(bktSetting, settingBackup, logs)
	})
}

// backedUp gives for each log how many of its records a backup holds.
func backedUp(tx *bbolt.Tx) (map[string]int64, error) {
	sizes := map[string]int64{}
	if v := tx.Bucket(bktSetting).Get(settingBackup); v != nil {
		if err := json.Unmarshal(v, &sizes); err != nil {
			return nil, fmt.Errorf("note of the last backup: %w", err)
		}
	}
	return sizes, nil
}
