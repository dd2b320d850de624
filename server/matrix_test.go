package server

import (
	"archive/zip"
	"bytes"
	"compress/gzip"
	"fmt"
	"io"
	"net/http"
	"net/url"
	"regexp"
	"slices"
	"strings"
	"testing"
	"time"

	"tripwell/forms"
	"tripwell/store"
)

// matrix says of every route what it is about, which decides who finds something there:
//
//	open   answers anybody
//	phone  asks for a phone's token, which opens nothing else
//	org    is about the whole organisation or the caller's sites together
//	all    is for managers of all sites
//	site   is about a thing of one site: unknown to whoever does not have the site
//	day    is about a thing of one site and day: unknown outside a period too
//	log    is about whole logs: refused to whoever sees a period only
//	own    is about something of the caller's own: unknown to everybody else
//
// TestMatrix_ fails for a route without a row here, and for a row without a route.
const matrix = `
GET /in open
POST /in open
POST /in/password open
POST /in/second open
GET /in/:token open
POST /in/:token open
POST /out open
GET /assets/* open
GET /t/:tag open
GET /T/:tag open
GET /field open
GET /field/* open
GET /sw.js open
GET /calendar/:token open
POST /exchange/enrol org
POST /exchange/renew phone
POST /exchange/push phone
POST /exchange/photo phone
GET /exchange/pull phone
POST /exchange/ask phone
GET /exchange/logs phone
GET /exchange/people phone
GET /exchange/entry phone
GET /exchange/snapshot phone
GET /trust open
POST /workbook/:making/stop own
POST /bundle/:making/stop own
GET /statement.pdf org
GET /notices org
GET /privacy org
GET /privacy/data.json org
GET /people/:person/remove all
POST /people/:person/remove all
GET /api open
GET /trust/tripwell-authority.crt open
GET /trust/tripwell-authority.mobileconfig open
GET /records/:record/seal day
GET /devices/:device/same site
POST /devices/:device/same site
GET /exchange/head phone
POST /exchange/head phone
GET / org
GET /sites org
GET /sites/:site site
GET /sites/:site/circuits site
GET /sites/:site/protection site
GET /panels/:panel site
GET /circuits/:circuit site
GET /devices/:device site
GET /entries/:entry day
GET /entries/:entry/photos/:photo day
GET /records/:entry/photos/:photo day
GET /defects org
GET /defects/parts org
GET /defects/past org
GET /defects/:defect site
GET /records/:record day
GET /dates org
GET /rounds org
GET /rounds/:round day
GET /reminders org
POST /reminders/calendar org
POST /reminders/calendar/revoke org
POST /reminders/digest org
GET /set-up org
GET /compliance org
GET /sites/:site/calendar site
GET /plans org
GET /plans/:plan org
GET /plans/:plan/marks org
GET /sites/:site/asked site
GET /limits/:set org
GET /forms/:kind/:task org
GET /downloads org
GET /workbook.xlsx org
POST /workbook org
GET /workbook/:making own
GET /workbook/:making/:file own
POST /bundle log
GET /bundle/:making own
GET /bundle/:making/:file own
GET /bundle.zip log
GET /sample org
GET /sample.pdf org
GET /labels org
GET /labels.pdf org
GET /label org
GET /table org
GET /round-sheet org
GET /device-sheet org
GET /me org
POST /me/password org
POST /me/second org
POST /me/second/on org
POST /me/second/off org
POST /me/sessions org
POST /me/phones/:phone own
GET /tray org
POST /tray org
GET /sites/new org
POST /sites org
GET /sites/:site/edit site
POST /sites/:site/edit site
GET /sites/:site/devices/new site
POST /sites/:site/devices site
GET /sites/:site/panels/new site
POST /sites/:site/panels site
GET /panels/:panel/edit site
POST /panels/:panel/edit site
GET /sites/:site/circuits/new site
POST /sites/:site/circuits site
GET /circuits/:circuit/edit site
POST /circuits/:circuit/edit site
GET /circuits/:circuit/order site
POST /circuits/:circuit/order site
GET /usual-places org
POST /usual-places org
GET /sites/:site/usual-places site
POST /sites/:site/usual-places site
GET /devices/:device/edit site
POST /devices/:device/edit site
GET /devices/:device/retire site
POST /devices/:device/retire site
GET /devices/:device/defects/new site
POST /devices/:device/defects site
GET /defects/:defect/:act site
POST /defects/:defect/:act site
GET /entries/:entry/correct day
POST /entries/:entry/correct day
POST /labels/batch org
GET /plans/new org
POST /plans org
GET /plans/:plan/edit org
POST /plans/:plan/edit org
GET /sites/:site/occasion site
POST /sites/:site/occasion site
GET /sites/:site/pause site
POST /sites/:site/pause site
GET /limits/:set/edit org
POST /limits/:set/edit org
GET /forms/:kind/:task/edit org
POST /forms/:kind/:task/edit org
POST /revisions org
GET /rounds/new org
POST /rounds org
GET /rounds/:round/edit day
POST /rounds/:round/edit day
POST /rounds/:round/accept day
GET /instruments/new org
POST /instruments org
GET /instruments/:instrument/past org
GET /instruments/:instrument/certificate org
POST /instruments/:instrument/certificate org
GET /instruments/:instrument/certificates/:record day
GET /instruments/:instrument/proved org
POST /instruments/:instrument/proved org
GET /instruments/:instrument/recall/:record day
POST /instruments/:instrument/recall/:record day
GET /instruments/:instrument org
POST /instruments/:instrument org
GET /import org
POST /import org
POST /import/columns org
GET /import/:upload own
POST /import/:upload own
GET /import/:upload/:file own
GET /mail all
POST /mail all
GET /kept-aside org
POST /kept-aside org
POST /kept-aside/head org
GET /results org
POST /results org
POST /results/columns org
GET /results/:upload own
POST /results/:upload own
GET /results/:upload/:file own
GET /people all
GET /people/new all
POST /people all
GET /people/:person all
GET /people/:person/edit all
POST /people/:person all
POST /people/:person/link all
POST /people/:person/code all
POST /people/:person/sessions all
GET /people/:person/end all
POST /people/:person/end all
GET /people/:person/phones/:phone all
POST /people/:person/phones/:phone all
`

// TestMatrix_EveryRouteHasARow holds the table against the routes.
func TestMatrix_EveryRouteHasARow(t *testing.T) {
	rows := matrixRows(t)
	for _, route := range publicRoutes() {
		key := route.method + " " + route.path
		if rows[key] == "" {
			t.Errorf("%s has no row: say what it is about", key)
		}
		delete(rows, key)
		if route.method == post && route.who&auditor != 0 && route.who&alone == 0 {
			t.Errorf("%s: an auditor only reads", key)
		}
		if route.who&alone != 0 && (route.method != post || route.who&auditor == 0) {
			t.Errorf("%s: only a POST of an auditor's is said to be its caller's alone", key)
		}
	}
	for key := range rows {
		t.Errorf("%s is no route any more", key)
	}
}

func matrixRows(t *testing.T) map[string]string {
	t.Helper()
	rows := map[string]string{}
	for line := range strings.Lines(strings.TrimSpace(matrix)) {
		f := strings.Fields(line)
		if len(f) != 3 || !slices.Contains([]string{"open", "phone", "org", "all", "site", "day", "log", "own"}, f[2]) {
			t.Fatalf("row %q", line)
		}
		rows[f[0]+" "+f[1]] = f[2]
	}
	return rows
}

// estate is a store with two sites that hold the same kinds of things, and tests within and outside a period.
type estate struct {
	*rig
	today         forms.Day
	here, there   map[string]string // by the name of a route's parameter
	outside       map[string]string // of this site, and of a day outside the period
	site          string            // the other site
	secret        []string          // ids that nobody with this site and period may be shown
	manager1      store.Person      // of this site only
	periodAuditor store.Person
}

func newEstate(t *testing.T) *estate {
	r := newRig(t, 2)
	e := &estate{rig: r, today: forms.DayOf(time.Now().UTC())}
	e.site = newID()
	r.append(store.Draft{Kind: "site.registered", Log: e.site, Subject: e.site, Body: set{"set": set{"code": "OTHER", "name": "Ottermoor Swim Hall", "zone": "UTC", "standard": "NEC"}}})
	mine := r.site
	e.here = e.furnish(mine, r.devices[0], "Here")
	r.site = e.site
	away := r.registerDevices(1)
	e.there = e.furnish(e.site, away[0], "There")
	r.site = mine
	e.outside = e.longAgo(r.devices[1])
	for _, id := range e.there {
		if len(id) == 36 && id != e.here["person"] {
			e.secret = append(e.secret, id)
		}
	}
	e.secret = append(e.secret, e.outside["entry"], e.outside["later"])
	e.manager1 = r.person("Manager 2", "manager", mine)
	p := r.auditor
	p.Name, p.ID = "Auditor 2", ""
	p.Period, p.Until = &store.Period{From: e.today - 30, To: e.today + 30}, ptr(e.today+60)
	var err error
	e.periodAuditor, err = r.store.PutPerson(t.Context(), r.manager.ID, p)
	must(t, err)
	return e
}

func ptr[T any](v T) *T { return &v }

// furnish gives a site one of everything a route can name.
func (e *estate) furnish(site, device, name string) map[string]string {
	e.t.Helper()
	things := map[string]string{"site": site, "device": device, "person": e.crew.ID, "plan": "button-monthly", "set": "us-class-a", "kind": "gfci-receptacle", "task": "button"}
	panel, circuit, round, entry, correction := newID(), newID(), newID(), newID(), newID()
	e.append(
		store.Draft{Kind: "panel.set", Log: site, Subject: panel, Body: set{"set": set{"name": "LP-" + name, "location": "Corridor"}}},
		store.Draft{Kind: "circuit.set", Log: site, Subject: circuit, Body: set{"set": set{"panel": panel, "numbers": "14", "breaker_a": 20}}},
		store.Draft{Kind: "device.set", Log: site, Subject: device, Body: set{"set": set{"circuit": circuit}}},
		store.Draft{Kind: "round.made", Log: site, Subject: round, Body: set{"set": set{"stops": []string{device + "/button", device + "/instrument"}, "day": e.today.String()}}},
		store.Draft{ID: entry, Kind: "entry.made", Log: site, Subject: device, Body: entryBody(9.9)}, // fails: a defect follows
		store.Draft{ID: correction, Kind: "entry.corrected", Log: site, Subject: entry, Body: set{"entry": entry, "readings": entryBody(9.8)["readings"], "reason": "misread"}},
	)
	must(e.t, e.store.View(ownerScope, func(v *store.View) error {
		list, err := v.Defects(store.DefectAsk{Site: site, State: store.DefectsAll, On: e.today})
		if err == nil && len(list) > 0 {
			things["defect"] = list[0].ID
		}
		return err
	}))
	if things["defect"] == "" {
		e.t.Fatal("no defect followed from a fail")
	}
	things["panel"], things["circuit"], things["round"], things["entry"], things["record"] = panel, circuit, round, entry, correction
	return things
}

// longAgo gives a device a failing test long before the period, which was put right before it, and one after it.
func (e *estate) longAgo(device string) map[string]string {
	e.t.Helper()
	before, fixed, round := newID(), newID(), newID()
	at := time.Now().AddDate(0, 0, -200)
	e.append(
		store.Draft{ID: before, Kind: "entry.made", Log: e.rig.site, Subject: device, At: at, Body: entryBody(9.9)},
		store.Draft{ID: fixed, Kind: "entry.made", Log: e.rig.site, Subject: device, At: at.AddDate(0, 0, 10), Body: entryBody(4.9)},
		store.Draft{Kind: "round.made", Log: e.rig.site, Subject: round, At: at, Body: set{"set": set{"stops": []string{device + "/button"}, "day": forms.DayOf(at).String()}}},
	)
	return map[string]string{"entry": before, "later": fixed, "record": before, "round": round}
}

// filled puts things into a route's parameters; ok is false where it names something a site does not have.
func filled(path string, things map[string]string) (at string, ok bool) {
	ok = true
	at = routeParam.ReplaceAllStringFunc(path, func(p string) string {
		if p == "*" {
			return "x"
		}
		if v := things[p[1:]]; v != "" {
			return v
		}
		ok = false
		return "x"
	})
	return at, ok
}

var routeParam = regexp.MustCompile(`:[a-z]+|\*`)

// Every route as everybody: who is let in is what the tables say, and another site's or another day's things look unknown.
func TestMatrix_RouteRoleSiteAndPeriod(t *testing.T) {
	e := newEstate(t)
	rows := matrixRows(t)
	phone := e.enrol(e.crew)
	type asker struct {
		name string
		who  who
		all  bool
		b    *http.Client
	}
	fresh := func(name string) asker {
		switch name {
		case "manager of all":
			return asker{name, manager, true, e.signIn(e.manager)}
		case "manager of one":
			return asker{name, manager, false, e.signIn(e.manager1)}
		case "crew":
			return asker{name, crew, false, e.signIn(e.crew)}
		}
		return asker{name, auditor, false, e.signIn(e.periodAuditor)}
	}
	ask := func(b *http.Client, route route, path string) answer {
		if route.method == get {
			return e.open(b, path)
		}
		return e.submit(b, path, "")
	}
	tried := map[string]int{}
	for _, name := range []string{"manager of all", "manager of one", "crew", "auditor"} {
		a := fresh(name)
		for _, route := range publicRoutes() {
			about := rows[route.method+" "+route.path]
			if about == "open" || about == "phone" {
				continue
			}
			mine, known := filled(route.path, e.here)
			if route.method == post && (strings.HasSuffix(route.path, "/end") || strings.HasSuffix(route.path, "/remove") || route.path == "/me/sessions" || route.path == "/people/:person/sessions") {
				known = false // what it does would end the test; who is let in is asked with a thing nobody has
				mine, _ = filled(route.path, nil)
			}
			where := fmt.Sprintf("%s %s as %s", route.method, route.path, name)
			in := route.who&a.who != 0 && (about != "all" || a.all) && (about != "log" || name != "auditor")
			res := ask(a.b, route, mine)
			switch {
			case !in && res.status != 403:
				t.Errorf("%s: got %d, want 403", where, res.status)
			case in && (res.status == 401 || res.status == 403 || res.status >= 500):
				t.Errorf("%s: got %d, want to be let in", where, res.status)
			case in && known && (about == "site" || about == "day") && res.status == 404:
				t.Errorf("%s: its own thing is unknown", where)
			}
			tried[about]++
			if !in || a.all || about != "site" && about != "day" {
				continue
			}
			if theirs, ok := filled(route.path, e.there); ok && theirs != mine {
				if res := ask(a.b, route, theirs); res.status != 404 {
					t.Errorf("%s, of another site: got %d, want 404", where, res.status)
				}
				tried["other site"]++
			}
			if then, ok := filled(route.path, e.outside); ok && about == "day" && name == "auditor" {
				if res := ask(a.b, route, then); res.status != 404 {
					t.Errorf("%s, outside the period: got %d, want 404", where, res.status)
				}
				tried["period"]++
			}
		}
	}
	for _, route := range publicRoutes() {
		about := rows[route.method+" "+route.path]
		at, _ := filled(route.path, e.here)
		req := phone.request(route.method, at, nil)
		req.Header.Set("Sec-Fetch-Site", "same-origin")
		out, byPhone := ask(browser(t), route, at), e.do(phone.client, req)
		switch about {
		case "open":
			if out.status == 401 || out.status == 403 {
				t.Errorf("%s %s signed out: got %d", route.method, route.path, out.status)
			}
		case "phone":
			if out.status != 401 || route.path != "/exchange/renew" && (byPhone.status == 401 || byPhone.status == 403) {
				t.Errorf("%s %s: got %d signed out and %d by a phone, want 401 and let in", route.method, route.path, out.status, byPhone.status)
			}
		default:
			toSignIn := out.status == 401 || out.status == 303 && strings.HasPrefix(out.header.Get("Location"), "/in")
			if !toSignIn || byPhone.status != 401 {
				t.Errorf("%s %s: got %d signed out and %d by a phone's token, want 401", route.method, route.path, out.status, byPhone.status)
			}
		}
	}
	for about, least := range map[string]int{"org": 100, "all": 20, "site": 100, "day": 12, "other site": 60, "period": 3} {
		if tried[about] < least {
			t.Errorf("%s: tried %d, want at least %d", about, tried[about], least)
		}
	}
}

// Whatever a read-only person opens or takes, nothing of it names a test outside their sites and days.
func TestScope_NoPageOrFileNamesWhatLiesOutside(t *testing.T) {
	e := newEstate(t)
	b := e.signIn(e.periodAuditor)
	queue := []string{"/", "/?site=" + e.rig.site}
	for _, route := range publicRoutes() {
		if route.method != get || route.who&auditor == 0 {
			continue
		}
		for _, things := range []map[string]string{e.here, e.outside, e.there} {
			if at, ok := filled(route.path, things); ok {
				queue = append(queue, at)
			}
		}
	}
	code := "KILN-LANE"
	queue = append(queue, "/workbook.xlsx", "/workbook.xlsx?site="+code, "/workbook.xlsx?from=2000-01-01&to=2099-12-31", "/bundle.zip", "/sample?n=2&word=x",
		"/round-sheet?site="+code+"&task=button&as=xlsx", "/device-sheet?device="+e.devices[1], "/defects?state=all", "/defects/past?site="+code, "/compliance?site="+code+"&from=2020-01-01")
	for _, sheet := range []string{"register", "entries", "due", "defects", "compliance", "gaps", "instruments", "plans", "limits", "people", "imported", "refused"} {
		queue = append(queue, "/table?sheet="+sheet+"&as=csv", "/table?sheet="+sheet+"&as=jsonl")
	}
	seen, answered := map[string]bool{}, 0
	for len(queue) > 0 && len(seen) < 600 {
		at := queue[0]
		queue = queue[1:]
		if seen[at] {
			continue
		}
		seen[at] = true
		res := e.open(b, at)
		if res.status != 200 {
			continue
		}
		answered++
		text := unpacked(t, res.body)
		for _, id := range e.secret {
			if strings.Contains(text, id) && !strings.Contains(at, id) {
				t.Errorf("%s names %s", at, id)
			}
		}
		if strings.Contains(text, "Ottermoor") || strings.Contains(text, "LP-There") {
			t.Errorf("%s names the other site", at)
		}
		if strings.Contains(res.body, "<!doctype html>") && at != "/field" && !strings.Contains(res.body, `class="only"`) {
			t.Errorf("%s does not say what may be seen", at)
		}
		for _, m := range hrefs.FindAllStringSubmatch(res.body, -1) {
			if to := strings.ReplaceAll(m[1], "&amp;", "&"); strings.HasPrefix(to, "/") && !strings.HasPrefix(to, "/assets/") {
				queue = append(queue, strings.Split(to, "#")[0])
			}
		}
	}
	if answered < 40 || !seen["/entries/"+e.here["entry"]] {
		t.Errorf("only %d pages were opened", answered)
	}
	if res := e.open(b, "/entries/"+e.here["entry"]); res.status != 200 {
		t.Errorf("a test within the period: got %d", res.status)
	}
	if res := e.open(b, "/bundle.zip"); res.status != 403 {
		t.Errorf("a whole log for a period: got %d, want 403", res.status)
	}
	// What was opened and taken stands in the office log, and its manager sees it.
	page := e.open(e.signIn(e.manager), "/people/"+e.periodAuditor.ID).body
	for _, want := range []string{"Opened: register, Kiln Lane Day Clinic", "Took: workbook", "Opened: tests, Kiln Lane Day Clinic", "Signed in"} {
		if !strings.Contains(page, want) {
			t.Errorf("the person's page does not say %q", want)
		}
	}
}

var hrefs = regexp.MustCompile(`href="([^"]+)"`)

// unpacked gives the text of an answer, of a zip's every part too.
func unpacked(t *testing.T, body string) string {
	t.Helper()
	if strings.HasPrefix(body, "\x1f\x8b") {
		r, err := gzip.NewReader(strings.NewReader(body))
		must(t, err)
		b, err := io.ReadAll(r)
		must(t, err)
		return string(b)
	}
	if !strings.HasPrefix(body, "PK\x03\x04") {
		return body
	}
	z, err := zip.NewReader(strings.NewReader(body), int64(len(body)))
	must(t, err)
	var all bytes.Buffer
	for _, f := range z.File {
		r, err := f.Open()
		must(t, err)
		_, err = io.Copy(&all, r)
		must(t, err)
	}
	return all.String()
}

func TestAccess_EndsWithItsLastDay(t *testing.T) {
	r := newRig(t, 1)
	today := forms.DayOf(time.Now().UTC())
	p := r.auditor
	p.Until = ptr(today)
	_, err := r.store.PutPerson(t.Context(), r.manager.ID, p)
	must(t, err)
	b := r.signIn(p)
	if res := r.open(b, "/"); res.status != 200 || !strings.Contains(res.body, "Read-only: Kiln Lane Day Clinic, until") {
		t.Errorf("on the last day: got %d", res.status)
	}
	p.Until = ptr(today - 2)
	_, err = r.store.PutPerson(t.Context(), r.manager.ID, p)
	must(t, err)
	if res := r.open(b, "/"); res.status == 200 {
		t.Error("the session goes on after the end")
	}
	token, err := r.store.NewLink(p.ID, time.Hour)
	must(t, err)
	if res := r.submit(browser(t), "/in/"+token, url.Values{}.Encode()); res.status != 404 {
		t.Errorf("a link after the end: got %d, want 404", res.status)
	}
}
