package store

import (
	"context"
	"crypto/rand"
	"errors"
	"fmt"
	"io/fs"
	"log/slog"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
	"sync/atomic"
	"time"

	"go.etcd.io/bbolt"
	bolterrors "go.etcd.io/bbolt/errors"

	"tripwell/store/record"
)

// BookFile is the name of the store's file in its folder.
const BookFile = "book.db"

// Options of Open. Now is the only clock the store knows.
type Options struct {
	Now    func() time.Time
	Create bool         // make the store when DIR holds none (temp file, rename, folder sync)
	Demo   bool         // with Create: marks the store DEMO for ever; without: refuse a store that is no demo store
	Log    *slog.Logger // what opening does that takes long; nil: nothing is logged
	URL    string       // label address (https://host); kept in the directory at first creation or when given
}

// Store is one organisation's book, its read models and its directory.
type Store struct {
	db    *bbolt.DB
	dir   string
	now   func() time.Time
	id    string
	org   string
	epoch int
	demo  bool

	mu      sync.RWMutex // guards closed and the sending side of queue
	closed  bool
	queue   chan *job
	written chan struct{} // closed when the writer has ended
	heads   sync.Mutex    // one signing at a time

	work   offWork      // the writer's own
	groups atomic.Int64 // committed since opening
	said   *bodies      // by the entries that came lately

	rebuilding atomic.Bool  // read models are being computed anew
	reading    atomic.Int64 // read transactions under way

	faults faults
}

// faults are set by tests only: what can go wrong between a decision and its answer.
type faults struct {
	commit func() error     // the commit fails: nothing is kept
	answer func() error     // the commit is kept, the answer is lost
	stop   map[string]error // by step of a sealing: the program ends there
}

// at gives the fault of a step, nil without one.
func (f *faults) at(step string) error { return f.stop[step] }

// Open opens DIR/book.db (0600, lock time-out 1 s). The caller closes it.
func Open(dir string, o Options) (*Store, error) {
	path := filepath.Join(dir, BookFile)
	_, err := os.Stat(path)
	switch {
	case errors.Is(err, fs.ErrNotExist) && !o.Create:
		return nil, &Error{Code: "not_found", Field: "data", Text: "There is no Tripwell store in " + dir + ". Name the folder that holds book.db, or start one with serve."}
	case errors.Is(err, fs.ErrNotExist):
		if err := create(dir, o); err != nil {
			return nil, err
		}
	case err != nil:
		return nil, &Error{Code: "unavailable", Field: "data", Text: "The store in " + dir + " cannot be reached: " + err.Error() + "."}
	}
	db, err := openFile(path)
	if err != nil {
		return nil, err
	}
	s := &Store{db: db, dir: dir, now: o.Now, queue: make(chan *job, queueLength), written: make(chan struct{}), work: newOffWork(), said: newBodies()}
	if err := s.start(o); err != nil {
		return nil, errors.Join(err, db.Close())
	}
	if err := s.refresh(o.Log); err != nil {
		return nil, errors.Join(err, db.Close())
	}
	go s.write()
	if o.URL != "" {
		if err := s.SetURL(o.URL); err != nil {
			return nil, errors.Join(err, s.Close())
		}
	}
	return s, nil
}

func openFile(path string) (*bbolt.DB, error) {
	if err := notCutOff(path); err != nil {
		return nil, err
	}
	o := *bbolt.DefaultOptions
	o.Timeout = time.Second
	o.FreelistType = bbolt.FreelistMapType
	o.NoStatistics = true
	if strconv.IntSize == 64 {
		o.InitialMmapSize = 1 << 30 // growing the map waits for every reader
	}
	db, err := bbolt.Open(path, 0o600, &o)
	switch {
	case errors.Is(err, bolterrors.ErrTimeout):
		return nil, &Error{Code: "unavailable", Field: "data", Text: "The store in " + filepath.Dir(path) + " is in use by another Tripwell. Stop that one first, or let this command reach it through its socket."}
	case err != nil:
		return nil, &Error{Code: "unavailable", Field: "data", Text: "The store in " + filepath.Dir(path) + " cannot be opened: " + err.Error() + ". Restore it from a backup if its file is damaged."}
	}
	return db, nil
}

// start reads who this store is.
func (s *Store) start(o Options) error {
	return s.db.View(func(tx *bbolt.Tx) error {
		meta := tx.Bucket(bktMeta)
		if meta == nil {
			return &Error{Code: "unavailable", Field: "data", Text: "The file book.db in " + s.dir + " is no Tripwell store."}
		}
		if v := readKey64(meta.Get(metaFormat)); v != formatVersion {
			return &Error{Code: "unavailable", Field: "data", Text: fmt.Sprintf("The store in %s has format %d; this program reads format %d. Use a newer program.", s.dir, v, formatVersion)}
		}
		s.id, s.org = string(meta.Get(metaStore)), string(meta.Get(metaOrg))
		s.epoch = int(readKey64(meta.Get(metaEpoch)))
		s.demo = meta.Get(metaDemo) != nil
		if o.Demo && !s.demo {
			return &Error{Code: "conflict", Field: "data", Text: "The store in " + s.dir + " is no demo store. Name an empty folder for the demo, or leave --data out."}
		}
		return nil
	})
}

// refresh rebuilds read models that another build of the program wrote, or whose rebuild was cut off, makes buckets that an
// older one did not know, and removes what a check left behind when it was killed.
func (s *Store) refresh(log *slog.Logger) error {
	for _, path := range leftovers(s.dir) {
		if err := os.RemoveAll(path); err != nil {
			return fmt.Errorf("remove %s: %w", path, err)
		}
	}
	lacking, written, records := false, uint64(0), uint64(0)
	err := s.db.View(func(tx *bbolt.Tx) error {
		written = readKey64(tx.Bucket(bktMeta).Get(metaModel))
		lacking = tx.Bucket(bktDiffer) == nil || tx.Bucket(bktDigest) == nil || tx.Bucket(bktHeads) == nil || tx.Bucket(bktSeal) == nil || tx.Bucket(bktFormer) == nil
		k, _ := tx.Bucket(bktRec).Cursor().Last()
		records = readKey64(k)
		return nil
	})
	if err == nil && lacking {
		err = s.db.Update(makeBuckets)
	}
	if err != nil {
		return err
	}
	if written != modelMark {
		if err := s.recompute(log, written, records); err != nil {
			return err
		}
	}
	_, err = s.wipeNow() // a sealing that was cut off
	return err
}

// recompute computes the read models anew at opening.
func (s *Store) recompute(log *slog.Logger, written, records uint64) error {
	if log != nil {
		log.Info("computing the pages anew from the book: they were written by another build, or not to the end",
			"records", records, "written", modelText(written), "reads", modelText(modelMark))
	}
	began := time.Now()
	if err := rebuild(context.Background(), s, s.db, nil); err != nil {
		return &Error{Code: "unavailable", Field: "data", Text: "The pages of the store in " + s.dir + " were written by another build of Tripwell, and this one cannot compute them anew from the book: " +
			err.Error() + ". The book is untouched. Use the program that wrote it, or a newer one."}
	}
	if log != nil {
		log.Info("computed the pages anew", "took", time.Since(began).Round(time.Millisecond))
	}
	return nil
}

// modelText writes a mark as MODEL.JUDGE; 0.0 is a rebuild that was cut off.
func modelText(mark uint64) string { return fmt.Sprintf("%d.%d", mark>>32, mark&(1<<32-1)) }

// create makes the file under another name, fills it, and renames it: a power cut leaves a whole store or none.
func create(dir string, o Options) error {
	if o.Demo {
		if err := emptyEnough(dir); err != nil {
			return err
		}
	}
	if err := os.MkdirAll(dir, 0o700); err != nil {
		return &Error{Code: "unavailable", Field: "data", Text: "The folder " + dir + " cannot be made: " + err.Error() + "."}
	}
	f, err := os.CreateTemp(dir, BookFile+".new-*")
	if err != nil {
		return &Error{Code: "unavailable", Field: "data", Text: "The folder " + dir + " cannot be written: " + err.Error() + "."}
	}
	temp := f.Name()
	defer os.Remove(temp) // gone already when all went well
	if err := f.Close(); err != nil {
		return fmt.Errorf("create store: %w", err)
	}
	db, err := bbolt.Open(temp, 0o600, &bbolt.Options{Timeout: time.Second, FreelistType: bbolt.FreelistMapType})
	if err != nil {
		return fmt.Errorf("create store: %w", err)
	}
	if err := errors.Join(fill(db, o), db.Sync(), db.Close()); err != nil {
		return fmt.Errorf("create store: %w", err)
	}
	if err := os.Rename(temp, filepath.Join(dir, BookFile)); err != nil {
		return fmt.Errorf("create store: %w", err)
	}
	return syncDir(dir)
}

// emptyEnough refuses a folder that holds something and no demo store.
func emptyEnough(dir string) error {
	entries, err := os.ReadDir(dir)
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return &Error{Code: "unavailable", Field: "data", Text: "The folder " + dir + " cannot be read: " + err.Error() + "."}
	}
	for _, e := range entries {
		if !strings.HasPrefix(e.Name(), "tripwell.sock") && !strings.HasPrefix(e.Name(), BookFile+".new-") {
			return &Error{Code: "conflict", Field: "data", Text: "The folder " + dir + " holds other things and no demo store. Name an empty folder for the demo, or leave --data out."}
		}
	}
	return nil
}

// fill writes the first transaction: all buckets, who this store is, and the shipped records.
func fill(db *bbolt.DB, o Options) error {
	return db.Update(func(tx *bbolt.Tx) error {
		if err := makeBuckets(tx); err != nil {
			return err
		}
		now := o.Now()
		s := &Store{id: newID(now), org: newID(now), epoch: 1, now: o.Now}
		values := map[string][]byte{
			string(metaStore): []byte(s.id), string(metaOrg): []byte(s.org),
			string(metaEpoch): key64(1), string(metaFormat): key64(formatVersion), string(metaModel): key64(modelMark),
		}
		if o.Demo {
			values[string(metaDemo)] = []byte{1}
		}
		for k, v := range values {
			if err := tx.Bucket(bktMeta).Put([]byte(k), v); err != nil {
				return err
			}
		}
		g := newGroup(s, tx)
		if err := g.ship(); err != nil {
			return err
		}
		return g.flush()
	})
}

// makeBuckets makes the buckets a file lacks: all of a new one, those of a younger program in an older file.
func makeBuckets(tx *bbolt.Tx) error {
	for _, list := range [][][]byte{bookBuckets, countBuckets, directoryBuckets, modelBuckets} {
		for _, name := range list {
			if _, err := tx.CreateBucketIfNotExists(name); err != nil {
				return err
			}
		}
	}
	return nil
}

func syncDir(dir string) error {
	d, err := os.Open(dir)
	if err != nil {
		return fmt.Errorf("sync folder: %w", err)
	}
	defer d.Close()
	if err := d.Sync(); err != nil {
		return fmt.Errorf("sync folder: %w", err)
	}
	return nil
}

// newID draws a version 7 id.
func newID(at time.Time) string {
	var b [10]byte
	_, _ = rand.Read(b[:]) // never fails (crypto/rand)
	return record.NewID(at, b)
}

// Close ends the writer after what is queued, then closes the file.
func (s *Store) Close() error {
	s.mu.Lock()
	if s.closed {
		s.mu.Unlock()
		return nil
	}
	s.closed = true
	close(s.queue)
	s.mu.Unlock()
	<-s.written
	if err := s.db.Close(); err != nil {
		return fmt.Errorf("close store: %w", err)
	}
	return nil
}

// ID is the store id, which is also its installation id.
func (s *Store) ID() string { return s.id }

// Org is the organisation's id: the first key part of every id made for an import.
func (s *Store) Org() string { return s.org }

// Epoch counts restores, from 1.
func (s *Store) Epoch() int { return s.epoch }

// Demo reports a store marked DEMO.
func (s *Store) Demo() bool { return s.demo }

// Dir is the store's folder.
func (s *Store) Dir() string { return s.dir }

// Now is the clock the store was opened with.
func (s *Store) Now() time.Time { return s.now() }

// View runs fn over one read transaction. Nothing handed out points into the store's file.
func (s *Store) View(scope Scope, fn func(v *View) error) error {
	return s.view(func(tx *bbolt.Tx) error { return fn(&View{tx: tx, s: s, scope: scope}) })
}

// view runs fn over one read transaction; what fn says is handed on as it is.
func (s *Store) view(fn func(tx *bbolt.Tx) error) error {
	s.mu.RLock()
	if s.closed {
		s.mu.RUnlock()
		return errClosed
	}
	if s.rebuilding.Load() {
		s.mu.RUnlock()
		return errRebuilding
	}
	s.reading.Add(1)
	defer s.reading.Add(-1)
	if s.rebuilding.Load() { // it began between the two looks
		s.mu.RUnlock()
		return errRebuilding
	}
	tx, err := s.db.Begin(false)
	s.mu.RUnlock()
	if err != nil {
		return fmt.Errorf("read store: %w", err)
	}
	defer func() { _ = tx.Rollback() }() // a read transaction has nothing to lose
	return fn(tx)
}

var errClosed = &Error{Code: "unavailable", Text: "The store is being closed. Try again in a moment."}
