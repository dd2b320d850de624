package store

import (
	"bytes"
	"context"
	"fmt"
	"slices"
	"testing"

	"pgregory.net/rapid"
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
