package server

import (
	"bytes"
	"crypto/sha256"
	"encoding/binary"
	"fmt"
	"io"
	"net/http"
	"path/filepath"
	"sync"
	"testing"
	"time"

	"go.etcd.io/bbolt"

	"tripwell/store"
)

const (
	benchRecords = 10_000
	benchBatch   = 50
	benchClients = 16
	benchRounds  = 4
	benchDevices = 2_000
)

// BenchmarkPush sends 10,000 entries over HTTP on loopback, in batches of 50 from 16 installations, durable, with every
// read model and every log's tree kept. Every second entry has a figure of its own; the others say what entries before them
// said, as button tests do. Two floors run between its rounds on the same bytes, in commits as large as the
// mean group the store itself wrote: x-floor puts each record and four scattered index keys straight into bbolt, x-records
// the record alone under a key that only grows. Both begin with as many records as the store's book holds before the clock
// starts (its register), so that all three write into files of one age.
func BenchmarkPush(b *testing.B) {
	for range b.N {
		r := newRig(b, benchDevices)
		rounds := benchLoad(b, r)
		floor := newFloor(b, "floor.db", r.bookSize(), 4)
		alone := newFloor(b, "records.db", r.bookSize(), 0)
		var ours, floored, recorded time.Duration
		commits := 0
		for _, load := range rounds {
			before := r.store.Groups()
			ours += load.push(b)
			groups := int(r.store.Groups() - before)
			commits += groups
			size := max(1, (len(load.records)+groups/2)/max(1, groups))
			floored += floor.put(b, load.records, size, 4)
			recorded += alone.put(b, load.records, size, 0)
		}
		b.ReportMetric(float64(ours)/float64(floored), "x-floor")
		b.ReportMetric(float64(ours)/float64(recorded), "x-records")
		b.ReportMetric(benchRecords/ours.Seconds(), "records/s")
		b.ReportMetric(benchRecords/float64(max(1, commits)), "records/commit")
	}
}

// benchRound is what one round sends: bodies by installation, in order, and the records in them.
type benchRound struct {
	phones  []*handset
	bodies  [][][]byte
	records [][]byte
}

func benchLoad(b *testing.B, r *rig) []benchRound {
	phones := make([]*handset, benchClients)
	transport := &http.Transport{MaxIdleConnsPerHost: benchClients}
	for i := range phones {
		phones[i] = r.handset(r.crew)
		phones[i].client = &http.Client{Transport: transport}
	}
	rounds := make([]benchRound, benchRounds)
	next := 0
	for i := range rounds {
		load := benchRound{phones: phones, bodies: make([][][]byte, benchClients)}
		for range benchRecords / benchBatch / benchRounds {
			phone := next % benchClients
			next++
			texts := make([]string, benchBatch)
			for k := range texts {
				device := r.devices[(next*benchBatch+k*37)%len(r.devices)]
				current := 4 + float64((next+k)%18)/10
				if k%2 == 0 { // a figure that no other entry has: this one is read and judged by itself
					current = 4 + float64(next*benchBatch+k)/10_000
				}
				texts[k] = phones[phone].entry(device, current).bytes(b)
				load.records = append(load.records, []byte(texts[k]))
			}
			load.bodies[phone] = append(load.bodies[phone], pushBody(b, texts...))
		}
		rounds[i] = load
	}
	return rounds
}

func (l benchRound) push(b *testing.B) time.Duration {
	b.Helper()
	began := time.Now()
	var wg sync.WaitGroup
	for i, phone := range l.phones {
		wg.Go(func() {
			for _, body := range l.bodies[i] {
				req, err := http.NewRequest(http.MethodPost, phone.url+"/exchange/push", bytes.NewReader(body))
				if err != nil {
					b.Error(err)
					return
				}
				req.Header.Set("Authorization", "Bearer "+phone.token)
				res, err := phone.client.Do(req)
				if err != nil {
					b.Error(err)
					return
				}
				answer, err := io.ReadAll(res.Body)
				_ = res.Body.Close()
				if err != nil || res.StatusCode != http.StatusOK || bytes.Count(answer, []byte(`"stored"`)) != benchBatch {
					b.Errorf("push: %d %v %.200s", res.StatusCode, err, answer)
					return
				}
			}
		})
	}
	wg.Wait()
	return time.Since(began)
}

// floor is bbolt with nothing above it, opened as the store opens its own.
type floor struct {
	db  *bbolt.DB
	seq uint64
}

func newFloor(b *testing.B, name string, already, indexes int) *floor {
	db, err := bbolt.Open(filepath.Join(b.TempDir(), name), 0o600, nil)
	must(b, err)
	must(b, db.Update(func(tx *bbolt.Tx) error {
		for _, bucket := range []string{"rec", "i0", "i1", "i2", "i3"} {
			if _, err := tx.CreateBucket([]byte(bucket)); err != nil {
				return err
			}
		}
		return nil
	}))
	b.Cleanup(func() { must(b, db.Close()) })
	f := &floor{db: db}
	register := make([][]byte, already)
	for i := range register {
		register[i] = bytes.Repeat([]byte{'r'}, 400)
	}
	f.put(b, register, 400, indexes)
	return f
}

// bookSize is how many records all logs hold.
func (r *rig) bookSize() (n int) {
	must(r.t, r.store.View(ownerScope, func(v *store.View) error {
		heads, err := v.Logs()
		for _, head := range heads {
			n += int(head.Size)
		}
		return err
	}))
	return n
}

func (f *floor) put(b *testing.B, records [][]byte, perCommit, indexes int) time.Duration {
	b.Helper()
	began := time.Now()
	for len(records) > 0 {
		n := min(perCommit, len(records))
		must(b, f.db.Update(func(tx *bbolt.Tx) error { return f.putGroup(tx, records[:n], indexes) }))
		records = records[n:]
	}
	return time.Since(began)
}

func (f *floor) putGroup(tx *bbolt.Tx, records [][]byte, indexes int) error {
	rec := tx.Bucket([]byte("rec"))
	rec.FillPercent = 0.95
	for _, r := range records {
		f.seq++
		key := binary.BigEndian.AppendUint64(nil, f.seq)
		if err := rec.Put(key, r); err != nil {
			return err
		}
		for i := range indexes {
			scattered := sha256.Sum256(fmt.Appendf(nil, "%d %d", i, f.seq))
			if err := tx.Bucket(fmt.Appendf(nil, "i%d", i)).Put(scattered[:16], key); err != nil {
				return err
			}
		}
	}
	return nil
}
