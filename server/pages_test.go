package server

import (
	"bytes"
	"os"
	"reflect"
	"regexp"
	"slices"
	"strings"
	"testing"

	"golang.org/x/net/html"

	"tripwell/export"
	"tripwell/forms"
	"tripwell/static"
	"tripwell/store"
)

// pageServer has pages, words and assets and no store: enough to render.
func pageServer(t testing.TB) *Server {
	t.Helper()
	s, err := New(nil, Options{})
	must(t, err)
	return s
}

func frameOf(title, here string) Frame {
	return Frame{Title: title, Here: here, Name: "Manager 1", Role: "manager", Today: "Tuesday 1 December 2026", Demo: true, Change: true}
}

// normalPages gives each office page as a manager of an ordinary organisation sees it.
func normalPages(t testing.TB, s *Server) map[string]any {
	t.Helper()
	pass, fail := mark{"pass", "Pass"}, mark{"fail", "Fail"}
	dark, err := export.CodeBitmap("HTTPS://DEMO.TRIPWELL.EXAMPLE/T/K7QM2P3")
	must(t, err)
	path, size := svgPath(dark)
	sites := []siteRow{
		{Href: "/sites/BRACKEN", Name: "Bracken Row Apartments", Code: "BRACKEN", Devices: "148", Failed: "1", Overdue: "0", FailedHref: "/sites/BRACKEN?state=failed", Next: "Fri 4 Dec · button", Year: strip{Href: "/compliance?site=A", Label: "Dates kept: Jan 2026 98 %", Months: []string{"b9 most", "b0 none"}}},
		{Href: "/sites/OTTERMOOR", Name: "Ottermoor Swim Hall", Code: "OTTERMOOR", Devices: "74", Failed: "2", Overdue: "31", FailedHref: "/sites/OTTERMOOR?state=failed", OverdueHref: "/sites/OTTERMOOR?state=overdue", Next: "since Mon 30 Nov · button", Late: true, Year: strip{Href: "/compliance?site=A", Label: "Dates kept: Jan 2026 98 %", Months: []string{"b9 most", "b0 none"}}},
	}
	conflicts := []conflictLine{{Text: "Rating: 20 stands; 15 was given by Crew 2 on 3 Nov 2026.", Href: "/records/0197b2c0-0000-7000-8000-000000000001"}}
	device := devicePage{
		Frame: frameOf("Pantry, by the sink", "sites"), Crumbs: []link{{Href: "/sites/KILN-LANE", Text: "Kiln Lane Day Clinic"}, {Text: "Ground floor · Kitchen"}},
		Heading: "Pantry, by the sink", Tag: "K7Q‑M2P‑3", What: "GFCI receptacle, 20 A · LP‑2 / 14 · installed 3 Mar 2021", Last: mark{"pass", "Pass: measurement, Tue 3 Nov"},
		Next: []dated{{"Button overdue since Mon 30 Nov", true}, {"Measurement by 3 Nov 2027", false}}, Conflicts: conflicts, Clash: "The tag K7Q‑M2P‑3 is also bound elsewhere.",
		Columns: []column{{"Trip current", true}, {"Trip time", true}, {"Wiring", false}, {"Ground path", true}},
		Entries: []entryRow{
			{Href: "/entries/1", Day: "3 Nov 2026", Task: "Measurement", Cells: []string{"5.5 mA", "610 ms at 6.8 mA", "Correct", "0.31 Ω"}, Verdict: pass, By: "Crew 1, Instrument B"},
			{Href: "/entries/2", Day: "5 Oct 2026", Task: "Button", Cells: []string{"", "", "", ""}, Verdict: pass, By: "Crew 1"},
			{Href: "/entries/3", Day: "2 Sep 2026", Task: "Button", Cells: []string{"", "", "", ""}, Verdict: mark{"none", "Not tested"}, Why: "room locked", By: "Crew 2"},
			{Href: "/entries/4", Day: "2 Sep 2025", Task: "Measurement", Cells: []string{"7.9 mA", "no trip", "Open ground", "more than 20 Ω"}, Verdict: fail, By: "Crew 2, Instrument A"},
		},
		Facts:   []fact{{Name: "Kind", Value: "GFCI receptacle"}, {Name: "Panel and circuit", Value: "LP‑2 / 14"}, {Name: "Rating", Value: "20 A"}, {Name: "Note", Value: "Faceplate replaced after the leak in the pantry."}},
		Actions: []link{{Href: "/devices/1/edit", Text: "Edit device"}, {Href: "/devices/1/retire", Text: "Retire"}},
		Label:   &label{Size: size, Path: path, Address: "HTTPS://DEMO.TRIPWELL.EXAMPLE/T/K7QM2P3", Aria: "QR code", Sheet: "/labels.pdf?device=1"},
		Chain: &chainShown{Circuit: link{Href: "/circuits/1", Text: "LP‑2 / 14"}, Breaker: "20 A · 12 AWG", Cover: pass, Critical: "Vaccine refrigerator", Marking: "Marking it needs: No Equipment Ground.", Dark: "TEST here takes the power from 1 other outlet.", Loops: []string{"Counter, left, said to hang on Counter, right"}, Order: link{Href: "/circuits/1/order", Text: "Order and LOAD feeds"},
			Ahead: []runShown{{Href: "/devices/8", Spot: "LP‑2", What: "GFCI breaker", Cover: pass}}, Behind: []runShown{{Href: "/devices/2", Spot: "Nurses' room", What: "Receptacle", Critical: "Vaccine refrigerator", Cover: pass}}},
		Earlier: []link{{Href: "/devices/0", Text: "GFCI receptacle, 15 A · installed 2 Feb 2012"}},
	}
	form := s.deviceSample(t)
	return map[string]any{
		"overview.html": overviewPage{Frame: frameOf("Overview", "overview"), Heading: "3 devices failed. 31 tests overdue.", Sites: sites,
			Sums:   []sum{{"/sites", "3", "devices failed", "at the last test", "fail"}, {"/dates?within=late", "31", "tests overdue", "at Ottermoor Swim Hall", "watch"}, {"/dates", "212", "due by Fri 1 Jan", "today and the 31 days after", ""}, {"/sites", "318", "devices", "at 3 sites", ""}},
			Decide: []decision{{Verdict: fail, Href: "/devices/9", Spot: "Plant room, dosing pump", Tag: "R4D‑0XN‑9", What: "Pressed TEST, power went off: no (must be yes)", Where: "Ottermoor Swim Hall · Basement · Plant room", When: "Button, failed since Mon 30 Nov"}},
			More:   []link{{Href: "/sites/OTTERMOOR?state=failed", Text: "All 17 failed at Ottermoor Swim Hall"}}},
		"defects.html": defectsPage{Frame: frameOf("Defects", "defects"), Heading: "3 failed: 1 still in use for 26 hours.", Under: "1 trips too easily.", Sites: choices("", "", "All sites"), States: s.defectStates(""), Severities: choices("", "", "Any"), More: "The first 300 are shown.", None: "None.", Links: []link{{Href: "/defects/parts", Text: "Parts to bring"}},
			Rows: []defectRow{{Verdict: fail, Href: "/defects/1", Spot: "Dosing pump", Tag: "R4D‑0XN‑9", Where: "Ottermoor Swim Hall · Basement", What: "Pressed TEST, power went off: no (must be yes).", State: "Still in use", Next: "It was opened again.", Age: "26 hours", Due: "4 Dec 2026", Late: true, InUse: true}}},
		"defect.html": defectPage{Frame: frameOf("Defect", "defects"), Crumbs: []link{{Href: "/defects", Text: "Defects"}, {Text: "Dosing pump"}}, Heading: "Pressed TEST, power went off: no.", Tag: "R4D‑0XN‑9", Under: "GFCI receptacle", Verdict: fail, State: "Still in use for 26 hours", Next: "It was opened again.", InUse: true,
			Facts: []fact{{Name: "Cause", Value: "Trip time"}, {Name: "Closed by", Value: "the passing test", Href: "/entries/1"}}, Actions: []link{{Href: "/defects/1/safe", Text: "Make safe", Here: true}},
			Steps: []defectStepShown{{When: "30 Nov 2026, 09:02", Head: "Button test · Crew 1", Verdict: &fail, Text: "No.", Href: "/entries/1"}, {When: "30 Nov 2026, 09:05", Head: "Note · Crew 1", Text: "Cover cracked", Href: "/records/1", Parts: "receptacle", Photos: []photoShown{{Href: "/records/1/photos/00", Alt: "Photo 1"}, {Alt: "Photo 2"}}}}},
		"defects_parts.html": partsPage{Frame: frameOf("Parts", "defects"), Crumbs: []link{{Href: "/defects", Text: "Defects"}}, Heading: "2 parts to bring.", Under: "1 names none.", Sites: []partsSite{{"Kiln Lane Day Clinic", []partRow{{"GFCI receptacle 20 A", "2", []link{{Href: "/defects/1", Text: "Pantry"}, {Href: "/defects/2", Text: "Door"}}}}}}},
		"defects_past.html":  pastPage{Frame: frameOf("Past", "defects"), Crumbs: []link{{Href: "/defects", Text: "Defects"}}, Heading: "12 defects closed.", Under: "From the first fail.", Sites: []pastRow{{"/defects?site=KILN-LANE", "Kiln Lane Day Clinic", "2", "12", "5 days"}}, Repeat: []repeatRow{{"/devices/1", "Pantry", "K7Q‑M2P‑3", "Kiln Lane Day Clinic", "3 times", "Mon 30 Nov"}}},
		"instrument.html": instrumentPage{Frame: frameOf("Instrument B", "set-up"), Crumbs: []link{{Href: "/set-up", Text: "Set up"}}, Heading: "Instrument B is calibrated until 3 Nov 2027.", Under: "SN 7", Late: true, Facts: []fact{{Name: "Accuracy", Value: "Trip time ±2 %"}}, Actions: []link{{Href: "/instruments/1/certificate", Text: "Add a certificate", Here: true}},
			Certificates: []certificateRow{{On: "3 Nov 2026", Number: "C-1", Due: "3 Nov 2027", Errors: "Trip current −5 %", By: "Manager 1", Verdict: fail, FileHref: "/instruments/1/certificates/2", RecallHref: "/instruments/1/recall/2", FileName: "c-1.pdf"}}, Proofs: []proofRow{{On: "3 Nov 2026", Where: "Workshop", By: "Crew 1", Verdict: pass}}},
		"seal.html": sealPage{Frame: frameOf("Seal a record", "set-up"), Heading: "Seal a record", Made: "Made 1 Dec 2026 by Crew 1", Sealed: "Sealed on 1 December by Office 1: it named a tenant.", First: "Correct this test first.",
			Restated: "Only this record states name.", Files: "2 files go with it.", Command: "tripwell seal 1", Back: link{Href: "/entries/1", Text: "Test"}},
		"recall.html": recallPage{Frame: frameOf("Recall", "set-up"), Crumbs: []link{{Href: "/set-up", Text: "Set up"}}, Heading: "12 tests are in doubt.", Under: "Made with Instrument B.", Errors: "Trip current −5 %", More: "The first 500 are shown.", Action: "/instruments/1/recall/2", Record: "0197b2c0-0000-7000-8000-000000000001", Reaches: choices("close", "close", "3 close"),
			Rows: []recallRow{{Now: fail, Then: pass, Href: "/entries/1", Day: "3 Oct 2026", Spot: "Pantry", Where: "Kiln Lane Day Clinic", What: "Trip current: showed 5.8 mA, was 6.11 mA, limit 6 mA", Share: "outside by 1.7 % of the limit"}}},
		"sites.html": sitesPage{Frame: frameOf("Sites", "sites"), Heading: "2 sites.", NewSite: "/sites/new", Sites: sites},
		"site.html": sitePage{Frame: frameOf("Kiln Lane Day Clinic", "sites"), Crumbs: []link{{Href: "/sites", Text: "Sites"}}, Heading: "Kiln Lane Day Clinic: 1 failed, 6 tests overdue.", Under: "96 devices · KILN-LANE · America/Chicago", Action: "/sites/KILN-LANE", Query: "pantry",
			Actions: []link{{Href: "/sites/KILN-LANE/devices/new", Text: "New device", Here: true}, {Href: "/sites/KILN-LANE/edit", Text: "Edit site"}}, Conflicts: conflicts, States: choices("failed", "", "All devices", "failed", "Failed at the last test"), Filtered: true, Found: "3 of 96 devices, in walking order",
			Groups: []registerGroup{
				{"Clinic · Ground floor · Kitchen", []registerRow{
					{Href: "/devices/1", Spot: "Pantry, by the sink", Tag: "K7Q‑M2P‑3", Kind: "GFCI receptacle, 20 A", Circuit: "LP‑2 / 14", Last: pass, LastWhen: "Measurement · Tue 3 Nov", Next: "Thu 31 Dec · button"},
					{Href: "/devices/2", Spot: "Pantry, door", Tag: "9HB‑2TC‑8", Kind: "Receptacle behind a GFCI, 20 A", Circuit: "LP‑2 / 14", Last: fail, LastWhen: "Button · Mon 30 Nov", Next: "overdue since Mon 30 Nov · button", Late: true}}},
				{"Clinic · Upper floor · Nurses' room", []registerRow{{Href: "/devices/3", Spot: "Left of the window", Kind: "Hospital receptacle, 20 A", Last: mark{"none", "Not tested yet"}, Next: dash}}}},
			Pager: []link{{Href: "/sites/KILN-LANE", Text: "1 to 500", Here: true}, {Href: "/sites/KILN-LANE?from=500", Text: "501 to 703"}}},
		"device.html": device,
		"circuits.html": circuitsPage{Frame: frameOf("Panels and circuits", "sites"), Crumbs: []link{{Href: "/sites/KILN-LANE", Text: "Kiln Lane Day Clinic"}}, Heading: "2 circuits in 1 panel.", Lead: "1 circuit has a nameplate to look at.", Conflicts: conflicts, None: "No panel.", Note: "What the register knows.",
			Actions: []link{{Href: "/sites/KILN-LANE/panels/new", Text: "New panel"}}, Panels: []panelShown{{Name: "LP‑2", Href: "/panels/1", Where: "Corridor", Circuits: []circuitRow{
				{Href: "/circuits/1", Numbers: "14", Breaker: "20 A", Poles: "1", Conductor: "12 AWG", Feeds: "Kitchen", Devices: []link{{Href: "/devices/1", Text: "Pantry, by the sink"}, {Href: "/devices/2", Text: "Pantry, door"}}},
				{Href: "/circuits/2", Numbers: "16", Breaker: "30 A", Conductor: "12 AWG", Flags: []mark{{"watch", "Breaker and conductor"}}}}}, {Name: "LP‑3"}}},
		"circuit.html": circuitPage{Frame: frameOf("Circuit LP‑2 / 14", "sites"), Crumbs: []link{{Href: "/sites/KILN-LANE", Text: "Kiln Lane Day Clinic"}}, Heading: "LP‑2 / 14 feeds 2 devices.", Lead: "20 A · 12 AWG", State: []mark{{"fail", "Pantry, by the sink: failed"}}, Conflicts: conflicts,
			Loops: []string{"Counter, left, said to hang on Counter, right"}, Off: []string{"Nurses' room: Vaccine refrigerator"}, OffCritical: "Vaccine refrigerator", Facts: []fact{{Name: "Breaker", Value: "20 A"}}, Actions: []link{{Href: "/circuits/1/edit", Text: "Edit circuit"}},
			Drawing: drawing{Width: 480, Height: 200, Aria: "LP‑2 / 14: 20 A, then Pantry", Lines: []drawnLine{{30, 40, 30, 66, false}, {70, 80, 70, 120, true}}, Boxes: []drawnBox{{2, 2, 150, 38, "panel"}}, Dots: []drawnDot{{30, 66, 10, "breaker"}}, Texts: []drawnText{{77, 27, "LP‑2 / 14", "name", "middle", ""}, {84, 120, "Pantry", "name", "start", "/devices/1"}}},
			Told:    []runShown{{Href: "/devices/1", Spot: "Pantry, by the sink", What: "GFCI receptacle", Critical: "Vaccine refrigerator", Cover: pass, Load: []runShown{{Href: "/devices/2", Spot: "Pantry, door", What: "Receptacle", Cover: fail}}}},
			Checks:  []checkShown{{What: "12 AWG", Mark: pass, Text: "20 A breaker, at most 20 A for 12 AWG.", Source: "NEC 240.4(D)"}, {What: "Desk", Href: "/devices/3", Mark: mark{"watch", "Look at it"}, Text: "30 A on a 20 A circuit", Why: "read on 3 Nov 2026"}}},
		"protection.html": protectionPage{Frame: frameOf("Protection gaps", "sites"), Crumbs: []link{{Href: "/sites/KILN-LANE", Text: "Kiln Lane Day Clinic"}}, Heading: "2 outlets whose protection wants a look.", Lead: "What the map says.", Calm: "Nothing.", ListNote: "Looked for: kitchens.", ListHref: "/sites/KILN-LANE/usual-places",
			Groups: []gapGroup{{Mark: fail, Text: "Behind a failed protector.", Rows: []gapRow{{Href: "/devices/2", Spot: "Workbench", Tag: "9HB‑2TC‑8", Where: "Plant level", Kind: "Receptacle", Circuit: "PP‑1 / 2", Critical: "Chlorine meter", By: link{Href: "/devices/1", Text: "Filter control"}}}},
				{Mark: mark{"watch", "Marking needed"}, Text: "No equipment ground.", Print: true, More: "12 more outlets are not shown here.", Rows: []gapRow{{Href: "/devices/3", Spot: "Bathroom", Where: "Apartment", Kind: "GFCI receptacle", Why: "No Equipment Ground"}}}}},
		"entry.html": s.entrySample(),
		"form.html":  form,
		"dates.html": datesPage{Frame: frameOf("Dates", "dates"), Heading: "37 tests overdue.", Under: "212 more have their date by 1 Jan 2027.", On: "2026-12-01", OnError: "Write the day as 2026-12-31.",
			Sites: choices("", "", "All sites", "1", "Kiln Lane Day Clinic"), Tasks: choices("", "", "All tests"), Within: choices("", "", "Overdue and the 31 days after"), More: "The first 500 are shown.",
			Groups: []dateGroup{{Day: "Monday 30 November 2026", Count: "1 test", Rows: []dateRow{{Href: "/devices/9", Spot: "Plant room, dosing pump", Tag: "R4D‑0XN‑9", Where: "Ottermoor Swim Hall · Basement", Task: "Button", State: "Overdue", Last: "3 Oct 2026", Late: true}}},
				{Day: "Thursday 31 December 2026", Count: "1 test", Rows: []dateRow{{Href: "/devices/1", Spot: "Pantry, by the sink", Tag: "K7Q‑M2P‑3", Where: "Kiln Lane Day Clinic · Ground floor · Kitchen", Task: "Button", State: "Due", Last: "3 Nov 2026"}}}}},
		"downloads.html": downloadsPage{Frame: frameOf("Downloads", "downloads"), Heading: "Take it with you.", Under: "Files are made from the store as it stands now.", LabelsText: "A PDF for sheets of 30 labels.",
			Workbook: []field{{Name: "site", Label: "Site", Options: choices("", "", "All your sites")}, {Name: "from", Label: "Entries from", Type: "date"}, {Name: "to", Label: "Entries to", Type: "date"}},
			Bundle:   []field{{Name: "site", ID: "bundle-site", Label: "Site", Options: choices("", "", "All your sites")}}, Labels: true},
		"sample.html": samplePage{Frame: frameOf("Sample", "downloads"), Crumbs: []link{{Href: "/downloads", Text: "Downloads"}}, Heading: "44 of 99 devices and 30 rooms to see", Under: "A fair sample.", Wrong: []link{{Text: "Give any word.", Href: "#f-word"}},
			Fields: []field{{Name: "word", Label: "The auditor's word", Type: "text", Error: "Give any word.", Required: true}, {Name: "site", Label: "Site", Options: choices("", "", "All your sites")}}, Drawn: true, Size: "44 of 99 devices.", How: "By SHA-256.",
			Head: "tripwell/1/2/1", Print: link{Href: "/sample.pdf?word=rain", Text: "Sheet"}, DevicesText: "Find each one.", Devices: []sampleRow{{"/devices/1", "By the sink", "K7Q‑M2P‑3", "KILN-LANE · Kitchen", "Pass on 3 Nov 2026"}}, RoomsText: "Count.",
			Rooms: []sampleRow{{Where: "KILN-LANE · Kitchen", Said: "3 in the register"}}, Result: "2 of 44 were wrong.", Action: "/rounds", Hidden: []hidden{{"site", "1"}}, ResultFields: []field{{Name: "found", Label: "Devices found wrong", Type: "number"}}, Asked: []hidden{{"word", "rain"}}},
		"making.html": makingPage{Frame: frameOf("Workbook", "downloads"), Crumbs: []link{{Href: "/downloads", Text: "Downloads"}}, Heading: "The workbook is being made.", Lead: "500 of about 2,000 tests are written.", Done: 500, Total: 2000,
			What: []string{"KILN-LANE", "Entries from 1 Jan 2026 to today"}, Again: []link{{Href: "/workbook/2JHC0VQ2", Text: "Look again"}}, File: []link{{Href: "/workbook/2JHC0VQ2/tripwell-KILN-LANE.xlsx", Text: "Download workbook"}}},
		"labels.html": labelsPage{Frame: frameOf("Labels", "downloads"), Heading: "Labels", Under: "Sheets and rolls.", Sheets: []field{{Name: "site", Label: "Site", Options: choices("", "", "All your sites")}},
			Batch: []field{{Name: "count", ID: "batch-count", Label: "How many", Type: "number", Value: "30"}}, Markings: []field{{Name: "roll", ID: "marking-roll", Label: "Roll", Type: "text"}}},
		"plans.html": plansPage{Frame: frameOf("Plans", "set-up"), Crumbs: []link{{Href: "/set-up", Text: "Set up"}}, Heading: "1 plan asks for tests.", Lead: "A plan says what is tested how often.", Actions: []link{{Href: "/plans/new", Text: "Make a plan", Here: true}}, Unworked: "Some dates are still being set again.",
			Groups: []planGroup{{"The whole organisation", []planRow{{Href: "/plans/button-monthly", Name: "TEST button", Kinds: "GFCI receptacle", Every: "once in each calendar month", Source: "Owner", Status: "memory"}}}}},
		"plan.html": planPage{Frame: frameOf("Cord sets", "set-up"), Crumbs: []link{{Href: "/plans", Text: "Plans"}}, Heading: "Cord sets", Under: "For the whole organisation: at most 3 months apart.", Actions: []link{{Href: "/plans/1/edit", Text: "Change this plan", Here: true}},
			Facts: []planFact{{"Test", "Receptacle test"}}, Marks: []markRow{{"North", "white", "1 Oct to 31 Dec 2026", true}}, Revisions: []planRevision{{"2", "1 Dec 2026", "at most 3 months apart", "Manager 1", "Cords fail early"}}},
		"plan_preview.html": planPreviewed{Frame: frameOf("Cord sets", "set-up"), Crumbs: []link{{Href: "/plans", Text: "Plans"}}, Heading: "What it changes", Lead: "12 devices.", Partly: "Only the first 5.", Says: []change{{"How often", "1 year", "3 months"}}, Counts: []string{"12 dates come earlier."},
			Rows: []dateMoved{{Href: "/devices/1", Spot: "Reel 4", Where: "Depot", Task: "Receptacle test", Was: "1 Dec 2026", Becomes: "1 Nov 2026", WasLate: true, Late: true}}, More: "3 more.", Hidden: []hidden{{"record", "1"}}, Back: "/plans"},
		"marks.html": marksPage{Frame: frameOf("Marks", "set-up"), Crumbs: []link{{Href: "/plans", Text: "Plans"}}, Heading: "Marks: cord sets", Under: "As of 1 Dec 2026.", Marks: []markRow{{"North", "white", "put on 1 Oct to 31 Dec 2026; good until 4 Jan 2027", true}},
			Old: []dateRow{{Href: "/devices/1", Spot: "Reel 4", Tag: "K7Q‑M2P‑3", Where: "Depot", State: "Overdue", Last: "South", Late: true}}, More: "The first 200 are shown."},
		"asked.html": askedPage{Frame: frameOf("Storms", "sites"), Crumbs: []link{{Href: "/sites/KILN-LANE", Text: "Kiln Lane Day Clinic"}}, Heading: "What asks for tests at once", Lead: "Tests of that day meet it.", Actions: []link{{Href: "/sites/KILN-LANE/occasion", Text: "Something happened", Here: true}},
			Occasions: []askedRow{{What: "lightning storm", Days: "Sat 4 Jul", Where: "The whole site", Text: "Main switch tripped", By: "Manager 1"}}, Pauses: []askedRow{{Href: "/1", Days: "1 Dec to 24 Dec 2026", Where: "12 devices", Text: "Ward closed", By: "Manager 1", Now: true}}},
		"compliance.html": compliancePage{Frame: frameOf("Dates kept", "dates"), Heading: "Kiln Lane Day Clinic: 93 % of the dates kept.", Under: "1 Jan to 1 Dec 2026: 812 dates.", From: "2026-01-01", To: "2026-12-01", Wrong: "The span ends before it begins.",
			Sites: choices("KILN-LANE", "KILN-LANE", "Kiln Lane Day Clinic"), Known: choices("now", "now", "As known now", "then", "As known then"), Bars: []keptBar{{"b10 all", "Jan 2026", "100 %"}, {"b7 few", "Feb 2026", "71 %"}}, Actions: []link{{Href: "/sites/KILN-LANE/calendar", Text: "Month calendar"}},
			Tables:       []keptTable{{"Month by month", "Month", []keptRow{{Name: "Jan 2026", Due: "68", InTime: "60", Graced: "1", Late: "2", Missed: "4", NoAccess: "1", Open: "0", P: "89 %"}}}, {"Site by site", "Site", []keptRow{{Name: "Kiln Lane", Href: "/compliance?site=KILN-LANE", Due: "1"}}}},
			StandingHead: "How dates stood", Standing: []standingLine{{"Button test", "GFCI receptacle", "1", "2", "3", "4", "5", "6"}}},
		"calendar.html": calendarPage{Frame: frameOf("Kiln Lane Day Clinic", "sites"), Crumbs: []link{{Href: "/sites/KILN-LANE", Text: "Kiln Lane Day Clinic"}}, Heading: "Kiln Lane Day Clinic, Dec 2026", Under: "41 tests in time.", Before: link{Href: "/1", Text: "Nov 2026"}, After: link{Href: "/2", Text: "Jan 2027"}, Days: []string{"Mon", "Tue"},
			Weeks: [][]calendarDay{{{}, {Number: "1", Name: "Tuesday 1 December 2026", Today: true, Done: "12 done", Late: "1 late", Missed: "2 missed", Coming: "3 due", Href: "/dates"}}}},
		"api.html": apiPage{Frame: frameOf("Exchange", ""), Heading: "Exchange", Lead: "How programs send records.", Calls: []apiCall{{Method: "POST", Path: "/exchange/push", Summary: "Send records", Text: "At most 500.", Needs: "Needs a token.", Answer: "A receipt for each.", Takes: []fact{{Name: "Body", Value: "Push"}}}}},
		"trust.html": trustPage{Frame: frameOf("Trust this server", ""), Heading: "Trust this server, once on each phone and computer", Lead: "It has a certificate of this house's own making.", Plain: true, Open: ownSecure, Authority: "Tripwell at tests.lan, 2026-12-01",
			Fingerprint: []string{"FF:F6:7B:E4:07:B4:66:3A", "EC:1A:95:FD:A8:B3:E4:08"}, Hosts: "tests.lan, 192.168.7.20", Certificate: "/" + certificateName, Profile: "/" + profileName, Systems: []trustSystem{{Name: "Android", Steps: []string{"Take the certificate file."}}},
			Address: "http://192.168.7.20/", Code: &codePicture{Side: 29, Path: `d="M4 4h1v1h-1z"`, Alt: "Code of the address http://192.168.7.20/"}},
		"setup.html":    s.setupSample(),
		"limits.html":   s.limitsSample(),
		"revision.html": revisionSample(),
		"form_shown.html": formShownPage{Frame: frameOf("Button test", "set-up"), Crumbs: []link{{Href: "/set-up", Text: "Set up"}}, Heading: "Button test", Under: "For GFCI receptacles", By: "Set by Manager", Reason: "Cover",
			Actions: []link{{Href: "/forms/gfci-receptacle/button/edit", Text: "Change this form"}}, Steps: []stepShown{{"Look", []askShown{{"Condition", "expected", "Sound · Damaged"}}}}},
		"import.html":         importPage{Frame: frameOf("Import a register", "sites"), Crumbs: []link{{Href: "/sites", Text: "Sites"}}, Heading: "Import a register", Lead: "CSV or XLSX.", Wrong: "The file is locked with a password.", Columns: []link{{Text: "Room"}, {Text: "Panel"}}, Kept: keptList{"/import/columns", []columnsKept{{"Mill lists", "1 Dec 2026, Manager 1"}}}},
		"import_preview.html": previewSample(),
		"aside.html": asidePage{Frame: frameOf("Kept aside", "set-up"), Crumbs: []link{{Href: "/set-up", Text: "Set up"}}, Heading: "2 records kept aside.", Under: "They came and do not stand in the book as they were sent.", Cut: "The newest 200 of each list are shown.",
			Refused: []asideRecord{{Head: "3 Nov 2026, 09:02 · Kiln Lane Day Clinic · Crew 1", Text: "The id is used.", Under: "SHA-256 00ff", Bytes: `{"id":`}},
			Differ:  []asideRecord{{Head: "Device registered · Kiln Lane Day Clinic", Text: "The first one stands.", Record: "/records/1", Bytes: `{"id":1}`, Changes: []change{{"Make", "Maker", "Other"}}}},
			Gaps:    []gapShown{{"Kiln Lane Day Clinic", "Crew 1", "4–5", "0197b2c0-0000-7000-8000-000000000001"}}},
		"results.html": resultsPage{Frame: frameOf("Tests made elsewhere", "sites"), Crumbs: []link{{Href: "/sites", Text: "Sites"}}, Heading: "Tests made elsewhere", Lead: "Rounds done on paper.", Wrong: "The file is empty.",
			What: field{Name: "what", Label: "What the file holds", Options: choices("past", "readings", "A round", "past", "Past results")}, Kept: keptList{"/results/columns", []columnsKept{{"Meter", "1 Dec 2026, Manager 1"}}}},
		"results_preview.html": resultsSample(),
		"people.html": peoplePage{Frame: frameOf("People", "people"), Heading: "3 people may sign in.", People: []peopleRow{
			{Href: "/people/1", Name: "Manager 1", Role: "Manager", Sites: "All sites", Contact: "ext. 401", Active: true}, {Href: "/people/2", Name: "Crew 1", Role: "Crew", Sites: "Kiln Lane Day Clinic, Ottermoor Swim Hall", Active: true}, {Href: "/people/3", Name: "Auditor 2", Role: "Auditor", Sites: "Kiln Lane Day Clinic"}}},
		"privacy.html": privacyPage{Frame: frameOf("What is kept about you", "me"), Heading: "What is kept about you", Lead: "Where, and for how long.", Facts: []fact{{Name: "Name", Value: "Crew 1"}, {Name: "Id", Value: "1", Mono: true}},
			SignIns: []string{"1 Dec 2026, 08:00"}, Kept: []keptShown{{"Names", "Directory", "Until removed"}}, Others: []link{{Href: "/people/1/remove", Text: "Crew 1"}}},
		"reminders.html": reminderPage{Frame: frameOf("Calendar and mail", "dates"), Heading: "Calendar and mail", Under: "What falls due.", Feed: "https://tests.example/calendar/secret.ics", Made: "You have an address.", Action: "/reminders/calendar", Submit: "Make a new address", Revoke: &link{Href: "/reminders/calendar/revoke", Text: "Revoke it"},
			NoMail: "No mail server is set up.", Mail: &link{Href: "/mail", Text: "Mail server"}, Said: []notice{{Shape: "fail", Text: "The digest was not sent."}}, Digest: formPage{Action: "/reminders/digest", Submit: "Save", WrongHead: "1 thing to mend", Wrong: []link{{Href: "#f-to", Text: "Write one mail address."}},
				Hidden: []hidden{{"record", "1"}}, Groups: []fieldGroup{{Fields: []field{{Name: "to", Label: "To this address", Type: "email"}, {Name: "every", Label: "How often", Options: choices("", "", "Not at all")}}}}}},
		"rounds.html": roundsPage{Frame: frameOf("Rounds", "rounds"), Heading: "1 round waits to be accepted.", Under: "2 rounds are open.", NewHref: "/rounds/new", None: "No round yet.",
			Groups: []roundGroup{{"Waiting to be accepted", []roundRow{{Href: "/rounds/1", Name: "Button test, Tue 1 Dec", Site: "Kiln Lane Day Clinic", Who: "Crew 1", Said: "38 done, 2 to come back to", Time: "1 h 5 min", State: mark{"watch", "Ended, not accepted"}, Done: 38, Of: 41}}}}},
		"round.html": roundSample(pass, fail),
		"visit.html": visitPage{Frame: frameOf("Plan a visit", "rounds"), Crumbs: []link{{Href: "/rounds", Text: "Rounds"}}, Heading: "Kiln Lane Day Clinic on Tuesday 1 December 2026: 41 tests.", Under: "1 round, about 1 h 5 min in all.", Day: "2026-12-01", Until: "2026-12-31", Hours: "6",
			DayError: "Write the day as 2026-12-31.", Sites: choices("1", "1", "Kiln Lane Day Clinic"), Tasks: choices("", "", "All tests"), Buildings: choices("", "", "All buildings", "Clinic", "Clinic"), Floors: choices("", "", "All floors"), Ready: true,
			Facts: []string{"12 will be overdue that day."}, Defects: []decision{{Verdict: fail, Href: "/defects/9", Spot: "Dosing pump", Tag: "R4D‑0XN‑9", What: "TEST does not trip it.", Where: "Plant room", When: "Still in use for 23 hours", Late: true, Bring: "Bring: wall plate"}}, Left: "All 14", Tell: []string{"Pantry: Tell first: Nurse in charge."},
			Rounds: []visitRound{{Name: "The round", Under: "41 tests · about 1 h 5 min", Stops: "1/button", Minutes: "65", N: "0", Who: choices("", "", "Whoever is there", "1", "Crew 1"), Groups: stopGroups(mark{"watch", "Overdue"})}},
			Wrong:  []link{{Text: "No round was chosen."}}, Action: "/rounds", Submit: "Make the round", Hidden: []hidden{{"record", "1"}}, Fields: []field{{Name: "note", Label: "Note", Type: "text-area", Wide: true}}, Pace: "Reckoned with button test 1.2 min."},
		"tray.html": trayPage{Frame: frameOf("Take in a phone's tray", ""), Problem: "Choose the file the phone saved first.", Report: &TrayReport{Records: 3, Stored: 1, Already: 1, Person: "Crew 1", Made: "2026-12-01T08:00:00.000Z",
			Refused: []store.Receipt{{ID: "0197b2c0-0000-7000-8000-000000000001", State: "refused", Code: "bad_body", Text: "The readings are missing."}}}},
		"person.html": personPage{Frame: frameOf("Crew 1", "people"), Crumbs: []link{{Href: "/people", Text: "People"}}, Heading: "Crew 1", Under: "Crew", Said: "The phone was taken off.", Facts: []fact{{Name: "Licence", Value: "EL 4411"}}, Edit: "/people/1/edit", Link: "/people/1/link", Code: "/people/1/code", End: "/people/1/end",
			Sessions: []sessionShown{{ID: "1", Browser: "Firefox on Linux", How: "link", Since: "1 Dec 2026"}}, EndSessions: "/people/1/sessions", Phones: []phoneLink{{phoneShown{Name: "9F0C21", Sent: []string{"up to its number 41 in Kiln Lane"}}, "/people/1/phones/2"}}, Uses: []useShown{{"1 Dec 2026", "Opened: register"}}},
		"me.html":            meSample(),
		"signin_second.html": secondPage{Frame: frameOf("Second step", ""), Half: "half", Problem: "This code is not the one of this moment."},
		"person_link.html":   personLinkPage{Frame: frameOf("People", "people"), Crumbs: []link{{Href: "/people", Text: "People"}}, Back: "/people/1", Heading: "Sign-in link for Crew 1", Under: "It is shown here once.", Link: "https://tripwell.example/in/2JHC0VQ2W4Z8S5N7K3M6P9R1T4", Text: "Send it to Crew 1 only."},
	}
}

func stopGroups(state mark) []stopGroup {
	return []stopGroup{{Place: "Clinic · Ground floor · Kitchen", Rows: []stopRow{{Href: "/devices/1", Spot: "Pantry, by the sink", Tag: "K7Q‑M2P‑3", Task: "Button test", State: state, EntryHref: "/entries/1", Said: "Crew 1 · Tue 1 Dec"}, {Spot: "A device that is not in the register", Task: "Button test", State: mark{"none", "Left"}}}}}
}

func roundSample(pass, fail mark) roundPage {
	rows := stopGroups(fail)[0].Rows
	return roundPage{Frame: frameOf("Button test, Tue 1 Dec", "rounds"), Crumbs: []link{{Href: "/rounds", Text: "Rounds"}}, Heading: "Kiln Lane Day Clinic: 38 of 41 done.", Under: "Button test, Tue 1 Dec · Crew 1", State: mark{"watch", "Ended, not accepted"},
		Done: 38, Of: 41, Said: "38 done, 2 to come back to, 1 passed over", Facts: []fact{{Name: "Day", Value: "Tuesday 1 December 2026"}}, Actions: []link{{Href: "/rounds/1/edit", Text: "Change or call off"}}, Live: "As of 09:00.",
		Conflicts: []conflictLine{{Text: "Note: another stands."}}, Attention: []roundPart{{"1 failed", rows}}, Groups: stopGroups(pass), Closings: []string{"Crew 1, 1 Dec 2026, 11:02: 38 done."}, Accepted: "Manager 1, 1 Dec 2026, 15:00.", Note: "The rest next week.",
		Accept: &formPage{Heading: "Accept this round", Lead: "What is left stays due.", Action: "/rounds/1/accept", Submit: "Accept", Wrong: []link{{Text: "Nobody has ended this round yet."}}, Hidden: []hidden{{"record", "1"}}, Groups: []fieldGroup{{Fields: []field{{Name: "accept_note", Label: "Note", Type: "text-area"}}}}},
		Tell:   []string{"Pantry: Tell first: Nurse in charge."}}
}

// deviceSample is the device form after a bad answer.
func (s *Server) deviceSample(t testing.TB) formPage {
	t.Helper()
	f, err := s.blankForm(map[string]string{"kind": forms.GFCIReceptacle, "name": "", "rating_a": "twenty"})
	must(t, err)
	f.refuse("name", "Spot is needed.")
	f.refuse("rating_a", "Write a number, for example 4.5.")
	k := s.ink()
	p := formPage{Frame: frameOf("New device", "sites"), Crumbs: []link{{Href: "/sites/KILN-LANE", Text: "Kiln Lane Day Clinic"}}, Heading: "Register a device at Kiln Lane Day Clinic", Lead: "The label stays with the place.", Action: "/sites/KILN-LANE/devices", Submit: "Register device", Cancel: "/sites/KILN-LANE",
		Groups: []fieldGroup{
			{Legend: "Where it is", Fields: []field{{Name: "building", Label: "Building"}, {Name: "room", Label: "Room"}, {Name: "name", Label: "Spot", Hint: "As you would say it on the telephone", Required: true}, {Name: "zone", Label: "Time zone", Known: zonesOffered}}},
			{Legend: "What it is", Note: "From its nameplate.", Fields: []field{{Name: "kind", Label: "Kind", Required: true, Options: choices("", forms.GFCIReceptacle, "GFCI receptacle", forms.RCD, "RCD")}, {Name: "rating_a", Label: "Rating", Type: "number", Unit: "A"}, {Name: "installed", Label: "Installed on", Type: "date"}, {Name: "delayed", Label: "Time-delayed type", Type: "check"}, {Name: "note", Label: "Note", Type: "text-area", Wide: true}, {Name: "sites", Label: "Sites", Type: "checks", Options: choices("", "1", "Kiln Lane Day Clinic", "2", "Ottermoor Swim Hall")}}},
		}}
	f.fill(&p)
	_ = k
	return p
}

func (s *Server) entrySample() entryPage {
	k := s.ink()
	lo, hi, limit, earlier := 4.0, 6.0, 4677.0, 610.0
	span := []scaleSpan{{log: true, from: 10, to: 10000}}
	time, current := forms.Reading{Typed: "3.12", Unit: "s", Value: 3120.0}, forms.Reading{Value: 6.4}
	never, above := forms.Reading{}, 2000.0
	never.Above = &above
	passed := forms.Finding{Reading: "trip_time_ms", Verdict: forms.Pass, Limit: &forms.Bounds{Max: &limit}, Level: "must"}
	beyond := forms.Finding{Reading: "trip_current_ma", Verdict: forms.ConditionalFail, Limit: &forms.Bounds{Min: &lo, Max: &hi}, Level: "must"}
	row := func(code string, r forms.Reading, f forms.Finding, sp []scaleSpan, before *float64) readingShown {
		return readingShown{Name: k.reading(code), Value: k.value(code, r), Typed: k.typed(code, r), Findings: []findingShown{{Verdict: k.verdict(f.Verdict), Limit: k.limit(code, f.Limit, f.Level), Source: "UL 943 Class A", Text: "Measure once more at a constant current.", Scale: k.scale(code, r, f, sp, before)}}}
	}
	return entryPage{
		Frame: frameOf("Measurement, 3 Nov 2026", "sites"), Crumbs: []link{{Href: "/sites/KILN-LANE", Text: "Kiln Lane Day Clinic"}, {Href: "/devices/1", Text: "Pantry, by the sink"}},
		Heading: "Measurement, 3 Nov 2026", Tag: "K7Q‑M2P‑3", Under: "GFCI receptacle, 20 A · LP‑2 / 14", Verdict: mark{"watch", "Conditional fail"}, First: &mark{"fail", "Fail"},
		Notices:  []notice{{Shape: "watch", Text: "This entry was corrected."}, {Shape: "fail", Text: "Withdrawn by Manager 1 on 4 Nov 2026, 09:10: wrong outlet", Href: "/defects/1"}},
		Readings: []readingShown{{Name: "Wiring", Value: "Correct", Findings: []findingShown{{Verdict: mark{"pass", "Pass"}, Limit: "must be correct", Source: "common practice, no source"}}}, row("trip_time_ms", time, passed, span, &earlier), row("trip_current_ma", current, beyond, nil, nil), row("trip_time_ms", never, passed, span, nil), {Name: "Test current", Value: "6.8 mA", Was: "68 mA", WasVerdict: &mark{"fail", "Fail"}}},
		Note:     "Fridge unplugged.\nPlugged in again.", Corrections: []correctionShown{{Head: "By Manager 1 on 4 Nov 2026, 09:02 · in force", Reason: "typed into the wrong field", Verdict: &mark{"pass", "Pass"}, Record: "/records/2", Changes: []change{{"Trip time", "6.4 ms", "3 120 ms"}}}},
		Facts: []fact{{Name: "Tested by", Value: "Crew 1"}, {Name: "Record", Value: "0197b2c0-0000-7000-8000-000000000001", Mono: true}}, Record: "/records/1", Actions: []link{{Href: "/entries/1/correct", Text: "Correct this entry"}},
	}
}

func (s *Server) setupSample() setupPage {
	shipped := forms.Shipped()
	p := setupPage{Frame: frameOf("Set up", "set-up"), Heading: "What tests are judged by.", NewInstrument: "/instruments/new", Instruments: []instrumentRow{
		{Href: "/instruments/1", Name: "Instrument B", Serial: "0042", Calibration: "27 Nov 2026, expired", Late: true, Accuracy: []string{"Trip time ±(2 % + 1 ms)", "Trip current ±5 %"}, Ramp: "0.5 mA every 200 ms"}}}
	for _, plan := range shipped.Plans {
		p.Plans = append(p.Plans, s.planRow(plan, ""))
	}
	p.LimitSets = s.limitSetRows(shipped.LimitSets)
	return p
}

func (s *Server) limitsSample() limitsPage {
	p := limitsPage{Frame: frameOf("Limits", "set-up"), Crumbs: []link{{Href: "/set-up", Text: "Set up"}}, Heading: "UL 943 Class A", Under: "For GFCI receptacles."}
	for _, set := range forms.Shipped().LimitSets {
		p.Revisions = append(p.Revisions, s.limitSet(set, nil, map[string][]scaleSpan{}))
	}
	return p
}

func meSample() mePage {
	must := func(c *codePicture, err error) *codePicture {
		if err != nil {
			panic(err)
		}
		return c
	}
	return mePage{Frame: frameOf("Your sign-in", "me"), Heading: "Your sign-in", Under: "Crew 1", Said: "The password is set.", Others: true, PasswordSet: "Set on 1 December 2026.",
		Sessions: []sessionShown{{ID: "1", Browser: "Firefox on Linux", How: "link", Since: "1 Dec 2026", Used: "1 Dec 2026", Address: "192.0.2.1"}, {ID: "2", Browser: "Chrome", Own: true}},
		Phones:   []phoneShown{{Name: "9F0C21", Since: "1 Dec 2026", Sent: []string{"up to its number 41 in Kiln Lane"}, Action: "/me/phones/1"}, {Name: "9F0C22"}},
		Password: formPage{Action: "/me/password", Submit: "Change password", WrongHead: "1 thing to mend", Wrong: []link{{Href: "#f-again", Text: "The two are not the same."}}, Groups: []fieldGroup{{Fields: []field{{Name: "password", Label: "New password", Type: "password", Auto: "new-password", Error: "Too short."}}}}},
		Second:   secondShown{May: true, Key: "JBSW Y3DP", Picture: must(drawCode("otpauth://totp/x", "Code to scan")), Codes: []string{"ABCD-EFGH"}, Form: formPage{Action: "/me/second/on", Submit: "Switch on"}},
	}
}

func revisionSample() revisionPage {
	fails := mark{"fail", "Fail"}
	passes := mark{"pass", "Pass"}
	return revisionPage{Frame: frameOf("What changes", "set-up"), Crumbs: []link{{Href: "/set-up", Text: "Set up"}}, Heading: "What changes: Class A", Lead: "In force from 1 Nov 2026.",
		Limits: []change{{Name: "Trip current", Was: "4 to 6 mA", Became: "4 to 5 mA"}}, Counts: []resultCount{{"3", passes, fails}},
		Entries: []entryPreviewed{{Href: "/entries/1", Day: "3 Nov 2026", Where: "By the sink", Task: "Instrument test", Was: passes, Becomes: fails}},
		Hidden:  []hidden{{"record", "1"}}, Back: "/limits/us-class-a/edit", More: "And 2 more."}
}

// keptFields hold what is not text of a reader: addresses, shapes, places in a drawing, codes.
var keptFields = []string{"Href", "FileHref", "RecallHref", "NewHref", "ListHref", "EntryHref", "Stops", "N", "Minutes", "Action", "Cancel", "Edit", "Link", "Code", "End", "EndSessions", "FailedHref", "OverdueHref", "NewSite", "NewInstrument", "Record", "Sheet", "Shape", "Path", "BandX", "BandW", "Limits", "X", "Anchor", "Before", "Mark", "Pointer", "At", "Y", "Inside", "Back", "Role", "Here", "Type", "Known", "Open", "Certificate", "Profile"}

// with gives a page with every text of a reader replaced, or with all lists emptied where text is nil.
func with(page any, text *string) any {
	v := reflect.New(reflect.TypeOf(page)).Elem()
	v.Set(reflect.ValueOf(page))
	replace(v, "", text)
	return v.Interface()
}

func replace(v reflect.Value, name string, text *string) {
	switch v.Kind() {
	case reflect.String:
		if text != nil && !slices.Contains(keptFields, name) && v.Len() > 0 {
			v.SetString(*text)
		}
	case reflect.Pointer:
		if !v.IsNil() {
			if text == nil {
				v.SetZero()
				return
			}
			fresh := reflect.New(v.Type().Elem())
			fresh.Elem().Set(v.Elem())
			replace(fresh.Elem(), name, text)
			v.Set(fresh)
		}
	case reflect.Slice:
		if text == nil {
			v.SetZero()
			return
		}
		fresh := reflect.MakeSlice(v.Type(), v.Len(), v.Len())
		reflect.Copy(fresh, v)
		for i := range fresh.Len() {
			replace(fresh.Index(i), name, text)
		}
		if v.CanSet() {
			v.Set(fresh)
		}
	case reflect.Struct:
		for i := range v.NumField() {
			f := v.Type().Field(i)
			if !f.IsExported() || v.Type() == reflect.TypeFor[hidden]() || v.Type() == reflect.TypeFor[field]() && (f.Name == "Name" || f.Name == "ID") {
				continue
			}
			replace(v.Field(i), f.Name, text)
		}
	}
}

var rawKey = regexp.MustCompile(`\b(office|access|reading|reading_name|option|missing|caution|limit|limit_set|verdict|kind|task|unit|plan|state|flag|record|step|intake)\.[a-z][a-z_.-]*`)

func TestPages_EveryTemplateInEveryCondition(t *testing.T) {
	s := pageServer(t)
	hostile := `<script>alert(1)</script>"'><img src=x onerror=alert(2)>{{.}}` + strings.Repeat("Langenwortverbindung", 30) + "\u202e" + strings.Repeat("Q", 40)
	pages := normalPages(t, s)
	for name := range s.pages {
		if own := []string{"signin.html", "signin_link.html", "error.html", "field.html"}; pages[name] == nil && !slices.Contains(own, name) {
			t.Errorf("%s is rendered by no case here", name)
		}
	}
	for name, page := range pages {
		for condition, view := range map[string]any{"normal": page, "empty": with(page, nil), "hostile": with(page, &hostile)} {
			t.Run(name+"/"+condition, func(t *testing.T) {
				var b bytes.Buffer
				must(t, s.pages[name].Execute(&b, view))
				checkPage(t, b.Bytes(), condition)
				if dir := os.Getenv("TRIPWELL_PAGES"); dir != "" {
					must(t, os.WriteFile(dir+"/"+condition+"-"+name, b.Bytes(), 0o600))
				}
			})
		}
	}
}

// ownSecure is where the page about trust, itself on http, leads: the one link with a host.
const ownSecure = "https://tests.lan"

// checkPage holds what is true of every office page, element by element.
func checkPage(t testing.TB, raw []byte, condition string) {
	t.Helper()
	doc, err := html.Parse(bytes.NewReader(raw))
	must(t, err)
	ids, labelled, asked, headings := map[string]int{}, map[string]bool{}, []string{}, 0
	for n := range doc.Descendants() {
		if n.Type == html.TextNode {
			if key := rawKey.FindString(n.Data); key != "" && condition == "normal" {
				t.Errorf("the key %s stands on the page instead of its words", key)
			}
			continue
		}
		if n.Type != html.ElementNode {
			continue
		}
		attrs := map[string]string{}
		for _, a := range n.Attr {
			attrs[a.Key] = a.Val
			if a.Key == "style" || strings.HasPrefix(a.Key, "on") && a.Key != "on" {
				t.Errorf("<%s> carries %s=%q: the content policy forbids it", n.Data, a.Key, a.Val)
			}
			if a.Key == "href" && !strings.HasPrefix(a.Val, "/") && !strings.HasPrefix(a.Val, "#") && a.Val != ownSecure {
				t.Errorf("<%s> leads to %q", n.Data, a.Val)
			}
		}
		if id := attrs["id"]; id != "" {
			ids[id]++
		}
		switch n.Data {
		case "img": // photos of records alone, said in words
			if attrs["alt"] == "" || condition == "normal" && !strings.Contains(attrs["src"], "/photos/") {
				t.Errorf("<img> of %q, %q in words", attrs["src"], attrs["alt"])
			}
		case "script", "style", "iframe":
			t.Errorf("<%s> on an office page", n.Data)
		case "h1":
			headings++
		case "label":
			labelled[attrs["for"]] = true
		case "th":
			if attrs["scope"] == "" {
				t.Errorf("a heading cell without scope: %s", text(n))
			}
		case "svg":
			// A drawing with links in it is a group of them, not one picture.
			if attrs["aria-hidden"] != "true" && (attrs["role"] != "img" && attrs["role"] != "group" || attrs["aria-label"] == "") {
				t.Errorf("a drawing without words for it")
			}
		case "input", "select", "textarea":
			if attrs["type"] != "hidden" && attrs["type"] != "checkbox" {
				asked = append(asked, attrs["id"])
			}
		case "a", "button":
			if strings.TrimSpace(text(n)) == "" && n.FirstChild != nil && n.FirstChild.Data != "img" && condition == "normal" {
				t.Errorf("<%s> without words", n.Data)
			}
		}
	}
	for id, n := range ids {
		if n > 1 {
			t.Errorf("the id %q stands %d times", id, n)
		}
	}
	for _, id := range asked {
		if !labelled[id] {
			t.Errorf("the field %q has no label", id)
		}
	}
	if headings != 1 {
		t.Errorf("got %d first headings, want 1", headings)
	}
}

func text(n *html.Node) string {
	var b strings.Builder
	for d := range n.Descendants() {
		if d.Type == html.TextNode {
			b.WriteString(d.Data)
		}
	}
	return b.String()
}

var officeKey = regexp.MustCompile(`[^d][( ]"((?:office|intake)\.[a-z0-9_.]*[a-z0-9_])"`) // not named("section", …)

func TestWords_EveryOfficeKeyIsInTheCatalogue(t *testing.T) {
	words, err := static.ReadWords("en")
	must(t, err)
	var sources []string
	for _, folder := range []string{".", "pages"} {
		entries, err := os.ReadDir(folder)
		must(t, err)
		for _, e := range entries {
			if name := folder + "/" + e.Name(); strings.HasSuffix(name, ".html") || strings.HasSuffix(name, ".go") && !strings.HasSuffix(name, "_test.go") {
				sources = append(sources, name)
			}
		}
	}
	seen := 0
	for _, name := range sources {
		raw, err := os.ReadFile(name)
		must(t, err)
		for _, m := range officeKey.FindAllSubmatch(raw, -1) {
			if seen++; !words.Has(string(m[1])) {
				t.Errorf("%s says %s, which is not in the catalogue", name, m[1])
			}
		}
	}
	if seen < 100 {
		t.Fatalf("only %d keys found in the sources; the search is broken", seen)
	}
}
