package server

import (
	"cmp"
	"fmt"
	"maps"
	"net/http"
	"slices"
	"strings"
	"time"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// entryPage is one entry: each reading with its limit, what was corrected, and where it stands in the book.
type entryPage struct {
	Frame
	Crumbs              []link
	Heading, Tag, Under string
	Verdict             mark
	First               *mark // what it came to as first entered, where a correction changed that
	Notices             []notice
	Readings            []readingShown
	Note                string
	Photos              []photoShown
	Corrections         []correctionShown
	Judgements          []judgementShown
	Facts               []fact
	Record              string
	Actions             []link
}

// notice is something to know before the readings are read.
type notice struct{ Shape, Text, Href string }

// readingShown is a reading with what each limit says of it.
type readingShown struct {
	Name, Value, Typed string
	Was                string // as first entered, where a correction changed it
	WasVerdict         *mark
	Findings           []findingShown
}

type findingShown struct {
	Verdict             mark
	Limit, Text, Source string
	Scale               *scaleDrawing
	Curve               *curveDrawing
}

// judgementShown is a result the entry has had, and by which revision.
type judgementShown struct {
	When, Under, By, Reason string
	Verdict                 mark
}

// correctionShown is a correction with the readings it changed.
type correctionShown struct {
	Head, Reason, Record string
	Verdict              *mark // of the entry as it stood after this correction
	Changes              []change
}

type change struct{ Name, Was, Became string }

func (s *Server) entryShow(c echo.Context) error {
	view := entryPage{Frame: s.frame(c, s.words.Say("office.entry.title"), "sites")}
	err := s.store.View(scope(c), func(v *store.View) error {
		e, err := v.Entry(c.Param("entry"))
		if err != nil {
			return err
		}
		return s.buildEntry(v, e, &view)
	})
	if err != nil {
		return err
	}
	return s.page(c, http.StatusOK, "entry.html", view)
}

func (s *Server) buildEntry(v *store.View, e store.Entry, view *entryPage) error {
	site, err := v.Site(e.Site)
	if err != nil {
		return err
	}
	device, known, err := deviceOf(v, e)
	if err != nil {
		return err
	}
	before, err := earlierFigures(v, e)
	if err != nil {
		return err
	}
	k := s.ink()
	view.Heading = k.say("office.entry.heading", "task", k.named("task", e.Task), "day", k.day(e.Day))
	view.Title = view.Heading
	view.Crumbs = []link{{Href: siteHref(site), Text: site.Name}}
	if known {
		view.Crumbs = append(view.Crumbs, link{Href: "/devices/" + device.ID, Text: s.spot(device.DeviceRow)})
		view.Title += ", " + s.spot(device.DeviceRow)
		view.Tag, view.Under = k.tag(device.Tag), joined(s.kindAndRating(device.DeviceRow), circuit(device.DeviceRow))
	}
	view.Verdict = k.verdict(e.Verdict.Result)
	if e.Sealed != nil {
		view.Verdict = mark{"none", k.say("office.seal.short")}
	}
	view.Notices = s.notices(v, e, site.Location())
	if known {
		if err := s.defectNotices(v, e, view); err != nil {
			return err
		}
	}
	spans, err := formSpans(v, e.Form)
	if err != nil {
		return err
	}
	view.Readings = s.readings(e, spans, before)
	if err := s.correctedFrom(v, e, view); err != nil {
		return err
	}
	view.Note = e.Note
	view.Photos = s.photosShown(v, e)
	if view.Corrections, err = s.corrections(v, e, site.Location()); err != nil {
		return err
	}
	if view.Judgements, err = s.judgements(v, e, site.Location()); err != nil {
		return err
	}
	view.Record = "/records/" + e.ID
	if view.Facts, err = s.entryFacts(v, e, site); err != nil {
		return err
	}
	if view.Change && e.Withdrawn == nil && e.Sealed == nil && len(e.Body.Readings) > 0 {
		view.Actions = []link{{Href: "/entries/" + e.ID + "/correct", Text: k.say("office.entry.correct")}}
	}
	if view.Change && e.Sealed == nil {
		view.Actions = append(view.Actions, link{Href: "/records/" + e.ID + "/seal", Text: k.say("office.seal.link")})
	}
	return nil
}

// deviceOf finds the device of an entry; an entry may come before its device.
func deviceOf(v *store.View, e store.Entry) (d store.Device, known bool, err error) {
	d, err = v.Device(e.Device, e.Day)
	if isRefusal(err) {
		return d, false, nil
	}
	return d, err == nil, err
}

// earlierFigures are the figures of the newest test of the same task before an entry, for the dashed mark.
func earlierFigures(v *store.View, e store.Entry) (map[string]float64, error) {
	all, err := v.Entries(e.Device)
	out := map[string]float64{}
	for _, other := range all {
		if other.Task != e.Task || other.ID == e.ID || other.Day >= e.Day || other.Withdrawn != nil {
			continue
		}
		for code, r := range other.Body.Readings {
			if f, ok := r.Value.(float64); ok {
				out[code] = f
			}
		}
		if len(out) > 0 {
			break
		}
	}
	return out, err
}

func (s *Server) notices(v *store.View, e store.Entry, zone *time.Location) []notice {
	k := s.ink()
	var out []notice
	if e.Sealed != nil {
		out = append(out, notice{Shape: "watch", Text: s.sealedText(v, e.Sealed, zone)})
	}
	if w := e.Withdrawn; w != nil {
		out = append(out, notice{Shape: "fail", Text: k.say("office.entry.withdrawn", "by", s.personName(v, w.By), "day", k.at(w.At, zone), "reason", w.Reason)})
	}
	if e.Imported {
		out = append(out, notice{Shape: "none", Text: k.say("office.entry.imported")})
	}
	if len(e.Corrections) > 0 && e.Sealed == nil {
		out = append(out, notice{Shape: "watch", Text: k.say("office.entry.corrected")})
	}
	for _, f := range e.Flags {
		text := k.say("flag."+f.Code, "detail", s.flagDetail(f))
		if !k.words.Has("flag." + f.Code) {
			text = joined(f.Code, f.Detail)
		}
		out = append(out, notice{Shape: "watch", Text: text})
	}
	return out
}

// flagDetail writes what a flag is about the way people read it.
func (s *Server) flagDetail(f store.Flag) string {
	k := s.ink()
	switch f.Code {
	case "clock":
		if off, err := time.ParseDuration(f.Detail); err == nil {
			return k.duration(off)
		}
	case "differs-shown":
		return lowerFirst(k.named("verdict", f.Detail))
	case "calibration-expired", "access-ended", "instrument-out":
		if day, err := forms.ParseDay(f.Detail); err == nil {
			return k.day(day)
		}
	case "differs-register":
		field, values, _ := strings.Cut(f.Detail, ": ")
		said, register, _ := strings.Cut(values, " / ")
		return lowerFirst(s.fieldName(field)) + ": " + s.fieldAnswer(field, said) + " / " + s.fieldAnswer(field, register)
	}
	return f.Detail
}

// readings shows every reading: those with findings in the findings' order, which is the form's, then the others.
func (s *Server) readings(e store.Entry, spans map[string][]scaleSpan, before map[string]float64) []readingShown {
	var out []readingShown
	place := map[string]int{}
	for _, f := range e.Verdict.Findings {
		if f.Reading == "" {
			continue
		}
		r := findingReading(e.Body, f)
		key := f.Reading + fmt.Sprint(f.At)
		at, ok := place[key]
		if !ok {
			at, place[key] = len(out), len(out)
			out = append(out, s.oneReading(e.OwnNames, f.Reading, r, f.At))
		}
		out[at].Findings = append(out[at].Findings, s.finding(f, r, e, spans, before))
	}
	for _, code := range readingOrder(e.Body.Readings) {
		if _, shown := place[code+fmt.Sprint(map[string]any(nil))]; !shown {
			out = append(out, s.oneReading(e.OwnNames, code, e.Body.Readings[code], nil))
		}
	}
	for _, one := range e.Body.Series {
		for _, code := range readingOrder(one.Readings) {
			if _, shown := place[code+fmt.Sprint(one.At)]; !shown {
				out = append(out, s.oneReading(e.OwnNames, code, one.Readings[code], one.At))
			}
		}
	}
	return out
}

func (s *Server) oneReading(own map[string]string, code string, r forms.Reading, at map[string]any) readingShown {
	k := s.ink()
	return readingShown{Name: s.readingName(own, code, at), Value: k.value(code, r), Typed: k.typed(code, r)}
}

func (s *Server) finding(f forms.Finding, r forms.Reading, e store.Entry, spans map[string][]scaleSpan, before map[string]float64) findingShown {
	k := s.ink()
	shown := findingShown{Verdict: k.verdict(f.Verdict), Limit: k.limit(f.Reading, f.Limit, f.Level), Source: f.Source}
	if f.Text != "" && f.Verdict != forms.Pass { // a limit of an organisation's own carries its sentence, no key
		shown.Text = k.say(f.Text)
	}
	if current, ok := e.Body.Readings["test_current_ma"]; ok && f.Reading == "trip_time_ms" && shown.Limit != "" && len(f.At) == 0 {
		shown.Limit += " " + k.say("office.entry.at_current", "current", k.value("test_current_ma", current))
	}
	if multiple, ok := f.At["multiple"].(float64); ok && multiple < 1 && f.Reading == "trip_time_ms" && shown.Limit == "" {
		shown.Limit = k.say("office.limits.no_trip")
	}
	var earlier *float64
	if b, ok := before[f.Reading]; ok && len(f.At) == 0 {
		earlier = &b
	}
	shown.Scale = k.scale(f.Reading, r, f, spans[f.Reading], earlier)
	shown.Curve = s.curveOf(f, r, e)
	return shown
}

// curveOf draws the inverse-time curve with an entry's point, where a trip time was held against it.
func (s *Server) curveOf(f forms.Finding, r forms.Reading, e store.Entry) *curveDrawing {
	if f.Reading != "trip_time_ms" || f.Limit == nil || f.Limit.Max == nil || len(f.At) > 0 {
		return nil
	}
	current, ok := e.Body.Readings["test_current_ma"].Value.(float64)
	if !ok || current < 4 {
		return nil
	}
	if _, ok := forms.ClassATripMS(current); !ok || e.Body.Given.RatedResidualMA != 0 {
		return nil
	}
	ms, ok := r.Value.(float64)
	if !ok && r.Above != nil {
		ms, ok = *r.Above, true
	}
	if !ok || ms <= 0 {
		return nil
	}
	return s.ink().classACurve(&[2]float64{current, ms}, shapeOf(f.Verdict))
}

// judgements lists every result an entry has had, where there was more than one: what the tester was shown, what it was
// judged when it came, and after each revision of the rules since.
func (s *Server) judgements(v *store.View, e store.Entry, zone *time.Location) ([]judgementShown, error) {
	k := s.ink()
	list, err := v.Judgements(e)
	if err != nil || len(list) < 2 || e.Sealed != nil {
		return nil, err
	}
	var out []judgementShown
	if e.Shown != nil && e.Shown.Result != "" {
		out = append(out, judgementShown{When: k.say("config.when_shown", "day", k.at(e.At, zone)), Under: k.say("config.shown_under", "rev", e.Shown.LimitRev), Verdict: k.verdict(e.Shown.Result)})
	}
	for _, j := range list {
		one := judgementShown{When: k.say("config.when_received", "day", k.at(e.Received, zone)), Verdict: k.verdict(j.Result)}
		if j.LimitSet != "" {
			one.Under = k.say("office.entry.limits_rev", "name", k.named("limit_set", j.LimitSet), "rev", j.LimitRev)
		}
		if r := j.Revision; r != nil {
			one.When = k.say("config.when_revised", "day", k.at(r.At, zone), "from", k.day(r.InForce))
			one.By, one.Reason = s.personName(v, r.By), r.Reason
		}
		out = append(out, one)
	}
	return out, nil
}

// findingReading is the reading a finding is about.
func findingReading(body forms.Entry, f forms.Finding) forms.Reading {
	for _, one := range body.Series {
		if len(f.At) > 0 && sameConditions(one.At, f.At) {
			if r, ok := one.Readings[f.Reading]; ok {
				return r
			}
		}
	}
	if r, ok := body.Readings[f.Reading]; ok {
		return r
	}
	return forms.Reading{}
}

func sameConditions(a, b map[string]any) bool {
	return maps.EqualFunc(a, b, func(x, y any) bool { return fmt.Sprint(x) == fmt.Sprint(y) })
}

// conditions writes what a series reading was taken under: at 5 × rated current, 180°.
func (s *Server) conditions(at map[string]any) string {
	k := s.ink()
	var parts []string
	for _, name := range []string{"multiple", "phase_deg", "waveform", "face"} {
		v, ok := at[name]
		if !ok {
			continue
		}
		text := fmt.Sprint(v)
		switch name {
		case "multiple":
			text = k.say("office.entry.multiple", "n", text)
		case "phase_deg":
			text = k.say("office.entry.phase", "n", text)
		default:
			text = lowerFirst(k.answer(name, text))
		}
		parts = append(parts, text)
	}
	for _, name := range sortedKeys(at) {
		if !slices.Contains([]string{"multiple", "phase_deg", "waveform", "face"}, name) {
			parts = append(parts, fmt.Sprint(at[name]))
		}
	}
	return k.say("office.entry.at", "conditions", strings.Join(parts, ", "))
}

func (s *Server) entryFacts(v *store.View, e store.Entry, site store.Site) ([]fact, error) {
	k, zone := s.ink(), site.Location()
	names, err := instrumentNames(v)
	if err != nil {
		return nil, err
	}
	var out []fact
	add := func(key, value string) {
		if value != "" && value != dash {
			out = append(out, fact{Name: k.say("office.entry." + key), Value: value})
		}
	}
	switch {
	case e.Imported:
		add("brought_by", s.personName(v, e.By))
	case e.Source != "" && e.Source != "phone":
		add("entered_by", s.personName(v, e.By))
	default:
		add("by", s.personName(v, e.By))
	}
	add("read_by", s.personOr(v, e.ReadBy))
	add("typed_by", s.personOr(v, e.TypedBy))
	add("at_time", k.at(e.At, zone))
	add("received", k.at(e.Received, zone))
	add("test_day", k.day(e.Day))
	add("source", k.named("office.entry.source_name", e.Source))
	if given := e.Body.Given; given.Instrument != "" {
		text := cmp.Or(names[given.Instrument], given.Instrument)
		if given.CalibrationDue != nil && *given.CalibrationDue != forms.NoDay {
			text += ", " + k.say("office.entry.calibration", "day", k.day(*given.CalibrationDue))
		}
		add("instrument", text)
	}
	if e.LimitSet != "" {
		add("limits", k.say("office.entry.limits_rev", "name", k.named("limit_set", e.LimitSet), "rev", e.LimitRev))
	}
	if e.Shown != nil && e.Shown.Result != "" {
		add("shown", k.named("verdict", e.Shown.Result))
	}
	add("log", k.say("office.entry.log_at", "log", site.Name, "pos", count(int(e.Pos))))
	out = append(out, fact{Name: k.say("office.entry.record"), Value: e.ID, Mono: true}, fact{Name: k.say("office.entry.from"), Value: e.From, Mono: true})
	return out, nil
}

func (s *Server) personOr(v *store.View, id string) string {
	if id == "" {
		return ""
	}
	return s.personName(v, id)
}

// formSpans are the scales an entry's form draws its readings on: one reading may have several, by the device's nominal
// voltage. A form nobody holds has none.
func formSpans(v *store.View, id string) (map[string][]scaleSpan, error) {
	all, err := v.Forms()
	if err != nil {
		return nil, err
	}
	spans := map[string][]scaleSpan{}
	for _, f := range all {
		if f.ID == id {
			addSpans(spans, f)
		}
	}
	return spans, nil
}

// addSpans adds the scales of a form's questions.
func addSpans(spans map[string][]scaleSpan, f *forms.Form) {
	for _, step := range f.Steps {
		for _, ask := range step.Asks {
			if ask.Scale != nil {
				spans[ask.Reading] = append(spans[ask.Reading], scaleSpan{log: ask.Scale.Shape == "log", from: ask.Scale.From, to: ask.Scale.To})
			}
		}
	}
}
