package store

import (
	"context"
	"crypto/rand"
	"encoding/binary"
	"fmt"
	"path/filepath"
	"sync"
	"testing"
	"time"

	"go.etcd.io/bbolt"
)

// BenchmarkPushStore pushes 10,000 entries in batches of 50 from 16 phones into a store with all it keeps, against the
// floor of the same bytes and four scattered index puts each, straight into bbolt in commits of the size the writer
// came to. Both run twice, in turn. x-records is against the records alone. (BenchmarkPush in server does it over HTTP.)
func BenchmarkPushStore(b *testing.B) {
	const rounds = 2
	for range b.N {
		var ours, floor, alone time.Duration
		for range rounds {
			lines, push := pushWork(b)
			before := time.Now()
			commits := push()
			ours += time.Since(before)
			size := len(lines) / commits
			floor += putAll(b, lines, size, 4)
			alone += putAll(b, lines, size, 0)
			b.ReportMetric(float64(size), "records/commit")
		}
		b.ReportMetric(float64(rounds*10_000)/ours.Seconds(), "records/s")
		b.ReportMetric(float64(ours)/float64(floor), "x-floor")
		b.ReportMetric(float64(ours)/float64(alone), "x-records")
	}
}

// pushWork prepares a store with three sites of devices and 16 phones with their records written.
func pushWork(b *testing.B) (lines [][]byte, push func() (commits int)) {
	at := time.Date(2026, 12, 1, 8, 0, 0, 0, time.UTC)
	s, err := Open(b.TempDir(), Options{Now: func() time.Time { return at }, Create: true})
	if err != nil {
		b.Fatal(err)
	}
	b.Cleanup(func() { _ = s.Close() })
	r := &rig{T: nil, Store: s, at: at}
	commits := 0
	var sites, devices []string
	ctx := context.Background()
	must := func(err error) {
		if err != nil {
			b.Fatal(err)
		}
	}
	manager, err := s.PutPerson(ctx, s.ID(), Person{Name: "Manager", Role: "manager", All: true, Active: true})
	must(err)
	for i := range 3 {
		site := newID(at)
		sites = append(sites, site)
		drafts := []Draft{{Kind: "site.registered", Log: site, Subject: site, By: manager.ID,
			Body: map[string]any{"set": map[string]any{"code": fmt.Sprintf("S-%d", i), "name": "Site", "zone": "UTC", "standard": "NEC"}}}}
		for j := range 150 {
			device, place := newID(at), newID(at)
			devices = append(devices, device)
			drafts = append(drafts,
				Draft{Kind: "place.registered", Log: site, Subject: place, By: manager.ID, Body: map[string]any{"set": map[string]any{"building": "A", "floor": "1", "room": fmt.Sprint(j), "name": "by the sink"}}},
				Draft{Kind: "device.registered", Log: site, Subject: device, By: manager.ID, Body: map[string]any{"set": map[string]any{"kind": "gfci-receptacle", "place": place}}})
		}
		_, err := s.Append(ctx, drafts...)
		must(err)
	}
	batches := make([][][]Incoming, 16)
	senders := make([]Sender, 16)
	for c := range batches {
		p := &phone{r: r, id: newID(at), by: manager, n: map[string]int64{}}
		_, err := s.Enrol(ctx, manager.ID, p.id)
		must(err)
		senders[c] = Sender{Installation: p.id}
		batches[c] = make([][]Incoming, 0, 13)
		for i := range 625 {
			d := (c*625 + i*7) % len(devices)
			line := p.make("entry.made", sites[d/150], devices[d], entry(20+float64(i%50)/10))
			lines = append(lines, line)
			if i%50 == 0 {
				batches[c] = append(batches[c], nil)
			}
			last := len(batches[c]) - 1
			batches[c][last] = append(batches[c][last], Incoming{Record: line})
		}
	}
	s.faults.commit = func() error { commits++; return nil }
	return lines, func() int {
		var wg sync.WaitGroup
		for c := range batches {
			wg.Go(func() {
				for _, batch := range batches[c] {
					rc, err := s.Push(ctx, senders[c], batch)
					if err != nil {
						b.Error(err)
						return
					}
					for _, x := range rc {
						if x.State != "stored" {
							b.Errorf("%+v", x)
							return
						}
					}
				}
			})
		}
		wg.Wait()
		return commits
	}
}

// putAll puts records under sequential keys and, for each, some scattered index entries.
func putAll(b *testing.B, lines [][]byte, size, indexes int) time.Duration {
	db, err := bbolt.Open(filepath.Join(b.TempDir(), "floor.db"), 0o600, &bbolt.Options{FreelistType: bbolt.FreelistMapType, InitialMmapSize: 1 << 30})
	if err != nil {
		b.Fatal(err)
	}
	defer db.Close()
	keys := make([][16]byte, len(lines)*indexes)
	for i := range keys {
		_, _ = rand.Read(keys[i][:])
	}
	before := time.Now()
	for done := 0; done < len(lines); done += size {
		err := db.Update(func(tx *bbolt.Tx) error {
			recs, err := tx.CreateBucketIfNotExists([]byte("rec"))
			if err != nil {
				return err
			}
			for i := done; i < min(done+size, len(lines)); i++ {
				seq := binary.BigEndian.AppendUint64(nil, uint64(i+1))
				if err := recs.Put(seq, lines[i]); err != nil {
					return err
				}
				for x := range indexes {
					bucket, err := tx.CreateBucketIfNotExists([]byte{'x', byte(x)})
					if err != nil {
						return err
					}
					if err := bucket.Put(keys[i*indexes+x][:], seq); err != nil {
						return err
					}
				}
			}
			return nil
		})
		if err != nil {
			b.Fatal(err)
		}
	}
	return time.Since(before)
}
