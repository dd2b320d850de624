package store

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"slices"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"

	"tripwell/forms"
	"tripwell/store/record"
)

// Whatever arrives, in whatever batches and order, however often: every good record is stored once with its own bytes,
// every bad one is refused once, and the store passes its check (the rig runs it).
func TestPush_AnyOrderAnyNumberOfTimes(t *testing.T) {
	if testing.Short() {
		t.Skip("long property run")
	}
	rapid.Check(t, func(rt *rapid.T) {
		t.Run("run", func(t *testing.T) {
			r := newRig(t)
			sites := []string{r.site("ELM-4"), r.site("OAK-1")}
			p := r.phone(r.person("crew", false, sites[0]))
			kinds := rapid.SliceOfN(rapid.SampledFrom([]string{"good", "good", "good", "cut", "wrong site", "unknown", "reused"}), 1, 25).Draw(rt, "records")
			var lines [][]byte
			good := map[string]bool{}
			for i, kind := range kinds {
				device := newID(r.clock())
				line := p.make("entry.made", sites[0], device, entry(float64(i)))
				switch kind {
				case "good":
					good[string(line)] = true
				case "cut":
					line = line[:len(line)-2]
				case "wrong site":
					line = p.make("entry.made", sites[1], device, entry(float64(i)))
				case "unknown":
					line = bytes.Replace(line, []byte("entry.made"), []byte("entry.kept"), 1)
				case "reused":
					good[string(line)] = true
					p.push(line)
					line = bytes.Replace(line, []byte(`"source":"phone"`), []byte(`"source":"paper"`), 1)
				}
				lines = append(lines, line)
			}
			sent := rapid.Permutation(slices.Concat(lines, lines)).Draw(rt, "sent")
			for len(sent) > 0 {
				n := rapid.IntRange(1, len(sent)).Draw(rt, "batch")
				p.push(sent[:n]...)
				sent = sent[n:]
			}
			page, err := r.Pull(Scope{All: true, Role: "manager"}, sites[0], "", 0)
			if err != nil {
				rt.Fatal(err)
			}
			stored := map[string]bool{}
			for _, x := range page.Records {
				if bytes.Contains([]byte(x.Record), []byte(`"entry.made"`)) {
					if stored[x.Record] {
						rt.Fatal("stored twice")
					}
					stored[x.Record] = true
				}
			}
			if fmt.Sprint(stored) != fmt.Sprint(good) {
				rt.Fatalf("got %d records stored, want the %d good ones", len(stored), len(good))
			}
			report, err := r.Check(context.Background(), nil)
			if err != nil || int(report.Refused) != len(lines)-len(good)+count(kinds, "reused") {
				rt.Fatalf("got %+v %v", report, err)
			}
		})
	})
}

func count(all []string, one string) (n int) {
	for _, s := range all {
		if s == one {
			n++
		}
	}
	return n
}

// The same records in another order, in other batches, give the same merged fields, the same losers and the same
// history: of registers, of corrections, of tags.
func TestPush_OrderOfArrivalChangesNoField(t *testing.T) {
	if testing.Short() {
		t.Skip("long property run")
	}
	rapid.Check(t, func(rt *rapid.T) {
		t.Run("run", func(t *testing.T) {
			writer := newRig(t)
			site := writer.site("ELM-4")
			device, place := newID(writer.clock()), newID(writer.clock())
			crew := writer.person("crew", false, site)
			phones := []*phone{writer.phone(crew), writer.phone(crew), writer.phone(writer.manager)}
			var lines [][]byte
			var senders []*phone
			add := func(p *phone, kind, subject string, body any) {
				lines, senders = append(lines, p.make(kind, site, subject, body)), append(senders, p)
			}
			add(phones[0], "place.registered", place, map[string]any{"set": map[string]any{"room": "Pantry", "name": "by the sink"}})
			add(phones[0], "device.registered", device, map[string]any{"set": map[string]any{"kind": "gfci-receptacle", "place": place}})
			entries := []string{}
			for i := range rapid.IntRange(1, 12).Draw(rt, "changes") {
				p := phones[rapid.IntRange(0, 2).Draw(rt, "phone")]
				writer.pass(time.Duration(rapid.IntRange(0, 3).Draw(rt, "pause")) * time.Minute)
				switch rapid.SampledFrom([]string{"set", "set", "entry", "correct", "tag"}).Draw(rt, "what") {
				case "set":
					field := rapid.SampledFrom([]string{"make", "model", "note"}).Draw(rt, "field")
					body := map[string]any{"set": map[string]any{field: fmt.Sprint(i)}}
					if rapid.Bool().Draw(rt, "knows") {
						body["seen"] = record.ClockText(p.clock + 1)
					}
					add(p, "device.set", device, body)
				case "entry":
					id := newID(writer.clock())
					entries = append(entries, id)
					lines, senders = append(lines, p.makeWith(id, "entry.made", site, device, entry(20+float64(i)))), append(senders, p)
				case "correct":
					if len(entries) > 0 {
						id := rapid.SampledFrom(entries).Draw(rt, "corrected")
						add(p, "entry.corrected", id, map[string]any{"entry": id, "readings": map[string]any{"trip_time_ms": 30 + i}, "reason": "typing error"})
					}
				case "tag":
					add(p, rapid.SampledFrom([]string{"tag.bound", "tag.freed"}).Draw(rt, "bound"), place, map[string]any{"tag": "K7QM21G"})
				}
			}
			order := rapid.Permutation(seqOf(len(lines))).Draw(rt, "order")
			var seen []string
			for _, order := range [][]int{seqOf(len(lines)), order} {
				r := writer.twin(site)
				for _, i := range order {
					rc, err := r.Push(context.Background(), Sender{Owner: true}, []Incoming{{Record: lines[i]}})
					if err != nil || rc[0].State != "stored" {
						rt.Fatalf("got %+v %v for %s", rc, err, lines[i])
					}
				}
				seen = append(seen, r.describe(device))
			}
			if seen[0] != seen[1] {
				rt.Fatalf("in order %v:\n%s\nin the order written:\n%s", order, seen[1], seen[0])
			}
		})
	})
}

func seqOf(n int) []int {
	all := make([]int, n)
	for i := range all {
		all[i] = i
	}
	return all
}

// twin is another store that knows the same site.
func (r *rig) twin(site string) *rig {
	t := newRig(r.T)
	page, err := r.Pull(Scope{All: true, Role: "manager"}, site, "", 1)
	if err != nil || len(page.Records) != 1 {
		r.Fatalf("site of the twin: %v", err)
	}
	if _, err := t.Push(context.Background(), Sender{Owner: true}, []Incoming{{Record: []byte(page.Records[0].Record)}}); err != nil {
		r.Fatal(err)
	}
	return t
}

// describe is what is read of a device, without what tells the order of arrival.
func (r *rig) describe(device string) string {
	var out any
	err := r.View(Scope{All: true, Role: "manager"}, func(v *View) error {
		d, err := v.Device(device, forms.DayOf(r.clock()))
		if err != nil {
			return err
		}
		entries, err := v.Entries(device)
		for i := range entries {
			entries[i].Pos = 0
		}
		slices.SortFunc(entries, func(a, b Entry) int { return strings.Compare(a.ID, b.ID) })
		out = []any{d, entries}
		return err
	})
	if err != nil {
		r.Fatal(err)
	}
	b, err := json.MarshalIndent(out, "", " ")
	if err != nil {
		r.Fatal(err)
	}
	return string(b)
}
