package store

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"runtime/debug"
	"time"

	"go.etcd.io/bbolt"
	bolterrors "go.etcd.io/bbolt/errors"

	"tripwell/store/record"
)

// Restored says what a restore did.
type Restored struct {
	Epoch   int
	Records int64
	Logs    int
	Before  string     // where the book that stood in the folder is kept; "" = there was none
	Head    string     // where the head that was signed last is kept; "" = none was signed
	Shorter []ShortLog // logs of which that head holds more than the backup
	NoKeys  bool       // the folder keys is not there: heads will be signed by a new key
}

// ShortLog is a log that was once signed longer than it is now.
type ShortLog struct {
	Log          string // site code, org or office
	Signed, Here int64
}

// restoring is what the folder begins with in which a backup is checked; what a killed restore left is removed at the next opening.
const restoring = "restoring-"

// Restore puts a backup in the place of the book of a folder, once it was copied there and found whole. The copy begins another
// epoch, larger than any this folder knew, and says so by book.restored: phones then send again what they keep. The book that
// stood there and the head it signed last are kept beside it. Nothing changes where the backup is damaged, belongs to another
// store, or a Tripwell runs on the folder.
func Restore(ctx context.Context, dir, file string, o Options, progress func(done, total int64)) (done Restored, err error) {
	if err := os.MkdirAll(dir, 0o700); err != nil {
		return done, &Error{Code: "unavailable", Field: "data", Text: "The folder " + dir + " cannot be made: " + err.Error() + "."}
	}
	here, err := standing(dir)
	if err != nil {
		return done, err
	}
	defer func() { err = errors.Join(err, here.release()) }()
	temp, err := os.MkdirTemp(dir, restoring)
	if err != nil {
		return done, &Error{Code: "unavailable", Field: "data", Text: "The folder " + dir + " cannot be written: " + err.Error() + "."}
	}
	defer func() { err = errors.Join(err, os.RemoveAll(temp)) }()
	path := filepath.Join(temp, BookFile)
	if _, _, err := copyFile(path, file); err != nil {
		return done, &Error{Code: "not_found", Field: "file", Text: "The backup cannot be copied into " + dir + ": " + err.Error() + "."}
	}
	last, err := lastSigned(dir)
	if err != nil {
		return done, err
	}
	if done, err = beginEpoch(ctx, temp, file, o, here, last, progress); err != nil {
		return done, err
	}
	if done.Head, err = keepHead(dir, last); err != nil {
		return done, err
	}
	if _, err := os.Stat(filepath.Join(dir, keysDir, keyFile)); errors.Is(err, fs.ErrNotExist) {
		done.NoKeys = true
	}
	if done.Before, err = here.keep(done.Epoch); err != nil {
		return done, err
	}
	if err := os.Rename(path, filepath.Join(dir, BookFile)); err != nil {
		return done, fmt.Errorf("restore: %w", err)
	}
	return done, syncDir(dir)
}

// formerBook is the book that is in a folder before a restore; its lock is held until the restore is over. Of a damaged one nothing
// is known, and nobody can have it open.
type formerBook struct {
	path  string
	db    *bbolt.DB
	store string
	epoch int
}

// standing takes hold of the folder's book, if there is one.
func standing(dir string) (*formerBook, error) {
	s := &formerBook{path: filepath.Join(dir, BookFile)}
	if _, err := os.Stat(s.path); errors.Is(err, fs.ErrNotExist) {
		s.path = ""
		return s, nil
	}
	if notCutOff(s.path) != nil {
		return s, nil
	}
	db, err := bbolt.Open(s.path, 0o600, &bbolt.Options{Timeout: time.Second, ReadOnly: true})
	if errors.Is(err, bolterrors.ErrTimeout) {
		return nil, &Error{Code: "conflict", Field: "data", Text: "A Tripwell is running on " + dir + ". Stop it first, then restore."}
	}
	if err != nil {
		return s, nil // damaged: that is what restoring is for
	}
	s.db = db
	s.identify()
	return s, nil
}

// identify reads who the book is. A damaged page ends in a fault of memory, which must not end the restore.
func (s *formerBook) identify() {
	defer debug.SetPanicOnFault(debug.SetPanicOnFault(true))
	defer func() { _ = recover() }()
	_ = s.db.View(func(tx *bbolt.Tx) error {
		if meta := tx.Bucket(bktMeta); meta != nil {
			s.store, s.epoch = string(meta.Get(metaStore)), int(readKey64(meta.Get(metaEpoch)))
		}
		return nil
	})
}

func (s *formerBook) release() error {
	if s.db == nil {
		return nil
	}
	return s.db.Close()
}

// keep gives the book another name beside its own, under which it stays.
func (s *formerBook) keep(epoch int) (string, error) {
	if s.path == "" {
		return "", nil
	}
	kept := fmt.Sprintf("%s.before-epoch-%d", s.path, epoch)
	if os.Link(s.path, kept) == nil {
		return kept, nil
	}
	if _, _, err := copyFile(kept, s.path); err != nil { // a disk without links
		return "", &Error{Code: "unavailable", Field: "data", Text: "The book that stands there cannot be kept as " + kept + ": " + err.Error() + ". Nothing was changed."}
	}
	return kept, nil
}

// lastSigned reads the head this folder signed last; nil where it signed none or the file cannot be read.
func lastSigned(dir string) (*signedHead, error) {
	raw, err := os.ReadFile(filepath.Join(dir, keysDir, headFile))
	if errors.Is(err, fs.ErrNotExist) {
		return nil, nil
	}
	if err != nil {
		return nil, fmt.Errorf("read last head: %w", err)
	}
	last := &signedHead{}
	if json.Unmarshal(raw, last) != nil {
		return &signedHead{}, nil // kept as it is, and nothing is known of it
	}
	return last, nil
}

// keepHead gives the head that was signed last a name of its own: the next one of the new epoch takes its place.
func keepHead(dir string, last *signedHead) (string, error) {
	if last == nil {
		return "", nil
	}
	kept := filepath.Join(dir, keysDir, fmt.Sprintf("head-epoch-%d.json", last.Epoch))
	if _, err := os.Stat(kept); err == nil {
		return kept, nil // by an earlier restore; nothing was signed since
	}
	if _, _, err := copyFile(kept, filepath.Join(dir, keysDir, headFile)); err != nil {
		return "", fmt.Errorf("keep last head: %w", err)
	}
	return kept, nil
}

// beginEpoch checks the copy in temp and makes it the first state of its next epoch.
func beginEpoch(ctx context.Context, temp, file string, o Options, here *formerBook, last *signedHead, progress func(done, total int64)) (done Restored, err error) {
	o.Create, o.Demo, o.URL = false, false, ""
	s, err := Open(temp, o)
	if err != nil {
		return done, &Error{Code: "conflict", Field: "file", Text: "The file " + file + " is no backup of a Tripwell store, or it is damaged. Nothing was changed. Take another backup."}
	}
	defer func() { err = errors.Join(err, s.Close()) }()
	if here.store != "" && here.store != s.id {
		return done, &Error{Code: "conflict", Field: "file", Text: "The backup is of another store than the one in this folder. Nothing was changed. Restore it into an empty folder, or take the backup that belongs here."}
	}
	var report CheckReport
	if err := s.checkCopy(ctx, &report, progress); err != nil {
		return done, err
	}
	if len(report.Problems) > 0 {
		return done, &Error{Code: "conflict", Field: "file", Text: "The backup " + file + " is damaged, so it was not put in place: " + report.Problems[0] + " Nothing was changed. Take another backup."}
	}
	epoch := max(s.epoch, here.epoch)
	if last != nil {
		epoch = max(epoch, last.Epoch)
	}
	former, err := here.heads(s)
	if err != nil {
		return done, err
	}
	heads, err := s.beginEpoch(ctx, epoch+1, former)
	if err != nil {
		return done, err
	}
	done.Epoch, done.Logs = s.epoch, len(heads)
	sizes := map[string]int64{}
	for _, h := range heads {
		sizes[h.Log], done.Records = h.Size, done.Records+h.Size
	}
	if last != nil {
		for _, h := range last.Logs {
			if h.Size > sizes[h.Log] {
				done.Shorter = append(done.Shorter, ShortLog{s.logCode(h.Log), h.Size, sizes[h.Log]})
			}
		}
	}
	return done, nil
}

// logsPerRecord keeps book.restored under the size a record may have.
const logsPerRecord = 400

// beginEpoch sets the epoch and appends book.restored, which carries how far each log went: its size and root. With many logs
// there are several.
func (s *Store) beginEpoch(ctx context.Context, epoch int, former []FormerHead) (heads []LogHead, err error) {
	err = s.do(ctx, 1, func(g *group) error {
		if heads, err = logHeads(g.tx); err != nil {
			return err
		}
		s.epoch = epoch // the writer's own goroutine runs this, and nobody else has this store yet
		if err := errors.Join(g.put(bktMeta, metaEpoch, key64(uint64(epoch))), g.keepFormer(former)); err != nil {
			return err
		}
		for from := 0; from < len(heads); from += logsPerRecord {
			part := heads[from:min(from+logsPerRecord, len(heads))]
			body := mustJSON(map[string]any{"epoch": epoch, "logs": part})
			if _, err := g.appendDrafts([]Draft{{Kind: "book.restored", Log: record.Office, Subject: s.id, By: s.id, Body: body}}); err != nil {
				return err
			}
		}
		return nil
	})
	return heads, err
}

// logCode is what people call a log.
func (s *Store) logCode(log string) string {
	code := log
	_ = s.View(Scope{All: true, Role: "owner"}, func(v *View) error {
		if site, err := v.Site(log); err == nil && site.Code != "" {
			code = site.Code
		}
		return nil
	})
	return code
}
