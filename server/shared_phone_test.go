package server

import (
	"encoding/json"
	"strings"
	"testing"
	"time"

	"tripwell/static/chromium"
	"tripwell/store"
)

// Two people share a phone: the first comes back by PIN without a line, and what is made then is the first one's.
func TestSharedPhone_TheSecondPersonLeavesTheFirstComesBackByPINWithoutALine(t *testing.T) {
	chromium.Need(t)
	r := newRig(t, 6)
	w := newWire(t, strings.TrimPrefix(r.url, "http://"))
	p := openHandheld(t, "http://"+w.addr)
	p.signIn(r, r.crew)
	p.ready()
	p.Tap("a", "Somebody else")
	p.Type("#pin-new", "246813")
	p.Tap("button", "Keep PIN")
	p.Sees("PIN kept.")

	second := r.person("Crew 9", "crew", r.site)
	link, err := r.store.NewLink(second.ID, time.Hour) // opened on the phone somebody is signed in to
	must(t, err)
	p.visit("/in/" + link + "?next=/field")
	p.Tap("main form button", "")
	p.Sees("Entries here are made by Crew 9.")
	w.cut()
	p.Tap("a", "Somebody else")
	p.Tap("button", "Switch")
	p.Type("#pin", "111111")
	p.Tap("button", "Go on as "+r.crew.Name)
	p.Sees("This is not the PIN.")
	p.Type("#pin", "246813")
	p.Tap("button", "Go on as "+r.crew.Name)
	p.Sees("Entries here are made by " + r.crew.Name + ".")
	p.Tap("a.row", "Kiln Lane")
	p.Tap("a.row", "Outlet 1")
	p.Tap("a", "Button test")
	p.testNext()
	w.mend()
	p.visit("/field#/tray")
	p.Tap("button", "Send now")
	p.Sees("All sent")
	pulled, err := r.store.Pull(store.Scope{All: true}, r.site, "", 1000)
	must(t, err)
	found := false
	for _, one := range pulled.Records {
		var env envelope
		must(t, json.Unmarshal([]byte(one.Record), &env))
		if env.Kind == "entry.made" {
			found = true
			if env.By != r.crew.ID {
				t.Errorf("the entry is by %s, want %s, who came back by PIN", env.By, r.crew.ID)
			}
		}
	}
	if !found {
		t.Error("no entry arrived")
	}
	if got := p.Value(`new Promise((yes) => { const open = indexedDB.open("tray"); open.onsuccess = () => { const get = open.result.transaction("me").objectStore("me").get("people"); get.onsuccess = () => { yes(JSON.stringify(get.result)); open.result.close(); }; }; })`); strings.Contains(got, "246813") {
		t.Errorf("the PIN stands on the phone: %s", got)
	}
}

// The rest of a round goes from the screen of one phone into the camera of another, both without a line.
func TestRound_RestIsHandedOverByTheScreen(t *testing.T) {
	chromium.Need(t)
	r := newRig(t, 30)
	w := newWire(t, strings.TrimPrefix(r.url, "http://"))
	giver := openHandheld(t, "http://"+w.addr)
	giver.signIn(r, r.crew)
	giver.ready()
	giver.Tap("a.row", "Kiln Lane")
	w.cut()
	giver.Until("the round", `(location.hash = "#/round/KILN-LANE", document.querySelector('a[href^="#/hand/"]'))`)
	giver.Tap("a.row", "Hand over the rest")
	giver.Sees("30 outlets to hand over")
	giver.Until("the code", `document.querySelector("svg.qr path")`)
	dark := giver.code()
	giver.Tap("button", "They have it")
	giver.Sees("30 outlets handed over")

	taker := r.takerOf(w, dark)
	taker.Sees("30 outlets taken over")
	taker.Tap("a", "Begin")
	taker.Sees("Taken over (30)")
	time.Sleep(100 * time.Millisecond)
	if rows, _ := taker.JS(`document.querySelectorAll('a.row[href^="#/device/"]').length`).(float64); rows < 24 {
		t.Errorf("the list has %v outlets, want those that were handed over", rows)
	}
	taker.Tap("a.row", "Outlet 2")
	taker.Tap("a", "Button test")
	taker.testNext()
	taker.Sees("Outlet 2: saved on this phone")
}

// code is what stands on the screen as a code, row by row.
func (p *handheld) code() (dark [][]bool) {
	p.T.Helper()
	p.Until("the code", `document.querySelector("svg.qr path")`)
	must(p.T, json.Unmarshal([]byte(p.Value(`(() => { const svg = document.querySelector("svg.qr"), side = svg.viewBox.baseVal.width, rows = Array.from({ length: side }, () => Array(side).fill(false));
		for (const [, x, y] of svg.querySelector("path").getAttribute("d").matchAll(/M(\d+) (\d+)h1/g)) rows[y][x] = true; return JSON.stringify(rows); })()`)), &dark))
	return dark
}

// A round made in the office and given to one person: the rest of it goes to a colleague's phone, who walks it there without a line;
// both parts count for the round.
func TestRound_RestOfAMadeRoundIsHandedOver(t *testing.T) {
	chromium.Need(t)
	r := newRig(t, 6)
	round := newID()
	var stops []any
	for _, d := range r.devices {
		stops = append(stops, d+"/button")
	}
	r.append(store.Draft{Kind: "round.made", Log: r.site, Subject: round, Body: set{"set": set{"stops": stops, "people": []any{r.crew.ID}}}})
	w := newWire(t, strings.TrimPrefix(r.url, "http://"))
	giver := openHandheld(t, "http://"+w.addr)
	giver.signIn(r, r.crew)
	giver.ready()
	giver.Until("the round", `(location.hash = "#/round/KILN-LANE/`+round+`", document.querySelector(".go")?.innerText === "Start this round")`)
	giver.Tap(".go", "")
	giver.testNext()
	giver.sendAll()
	w.cut()
	giver.Until("the round", `(location.hash = "#/round/KILN-LANE/`+round+`", document.querySelector('a[href^="#/hand/"]'))`)
	giver.Tap("a.row", "Hand over the rest")
	giver.Sees("5 outlets to hand over")
	dark := giver.code()
	giver.Tap("button", "They have it")
	giver.Sees("5 outlets handed over")

	taker := r.takerOf(w, dark)
	taker.Sees("5 outlets taken over")
	taker.Tap("a", "Begin")
	taker.Sees("End the round with 5 left")
	taker.Tap("a.go", "Go on")
	taker.testNext()
	taker.Until("the round again", `(location.hash = "#/round/KILN-LANE/`+round+`", document.body.innerText.includes("1 done · 4 left"))`)
	w.mend()
	taker.sendAll()
	giver.Until("the round where it was given", `(location.hash = "#/round/KILN-LANE/`+round+`", document.querySelector(".go")?.innerText === "End the round")`)
	eventually(t, "both parts in the round", func() (both bool) {
		must(t, r.store.View(r.manager.Scope(), func(v *store.View) error {
			got, err := v.Round(round)
			both = err == nil && got.Counts["done"] == 2
			return err
		}))
		return both
	})
}

// takerOf is a colleague's phone that holds its camera to a code, without a line.
func (r *rig) takerOf(w *wire, code [][]bool) *handheld {
	r.t.Helper()
	w.mend()
	p := openHandheld(r.t, "http://"+w.addr, chromium.Camera(chromium.Film(r.t, code)))
	p.signIn(r, r.person("Crew 8", "crew", r.site))
	p.ready()
	w.cut()
	p.Until("the round", `(location.hash = "#/round/KILN-LANE", document.querySelector('a[href^="#/take/"]'))`)
	p.Tap("a.row", "Take over")
	return p
}
