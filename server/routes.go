package server

import (
	"net/http"

	"github.com/labstack/echo/v4"

	"tripwell/store"
)

// route is one row of a table: how it is asked, who may ask, and who answers. body is the largest request body in bytes,
// 0 = the limit of an ordinary form.
type route struct {
	method, path string
	who          who
	handle       func(*Server, echo.Context) error
	body         int64
}

const (
	get  = http.MethodGet
	post = http.MethodPost
)

const (
	formLimit   = 256 << 10
	pushLimit   = 512 << 10
	trayLimit   = 512 << 20 // a phone's records with hundreds of photos; photos are taken one at a time
	importLimit = 64 << 20
	// mappingLimit holds the form of a preview: every heading and every word of a large file.
	mappingLimit = 512 << 10
)

// publicRoutes is everything the public face answers.
func publicRoutes() []route {
	return []route{
		// access
		{get, "/in", anyone, (*Server).linkAsk, 0},
		{post, "/in", anyone, (*Server).linkPasted, 0},
		{post, "/in/password", anyone, (*Server).passwordTyped, 0},
		{post, "/in/second", anyone, (*Server).secondTyped, 0},
		{get, "/in/:token", anyone, (*Server).linkShow, 0},
		{post, "/in/:token", anyone, (*Server).linkSpend, 0},
		{post, "/out", anyone, (*Server).sessionEnd, 0},
		{get, "/assets/*", anyone, (*Server).assetShow, 0},
		{get, "/t/:tag", anyone, (*Server).tagOpen, 0},
		{get, "/T/:tag", anyone, (*Server).tagOpen, 0},

		// field client
		{get, "/field", anyone, (*Server).fieldShow, 0},
		{get, "/field/*", anyone, (*Server).fieldShow, 0},
		{get, "/sw.js", anyone, (*Server).workerShow, 0},

		// a person's calendar, by its secret address
		{get, "/calendar/:token", anyone, (*Server).feedShow, 0},

		// what programs may ask
		{get, "/api", anyone, (*Server).apiShow, 0},

		// trust in the house's own authority
		{get, "/trust", anyone, (*Server).trustShow, 0},
		{get, "/trust/" + certificateName, anyone, (*Server).trustCertificate, 0},
		{get, "/trust/" + profileName, anyone, (*Server).trustProfile, 0},

		// exchange
		{post, "/exchange/enrol", crew | manager, (*Server).exchangeEnrol, 0},
		{post, "/exchange/renew", phone, (*Server).exchangeRenew, 0},
		{post, "/exchange/push", phone, (*Server).exchangePush, pushLimit},
		{post, "/exchange/photo", phone, (*Server).exchangePhoto, store.PhotoBytes},
		{get, "/exchange/pull", phone, (*Server).exchangePull, 0},
		{post, "/exchange/ask", phone, (*Server).exchangeAsk, 0},
		{get, "/exchange/logs", phone, (*Server).exchangeLogs, 0},
		{get, "/exchange/people", phone, (*Server).exchangePeople, 0},
		{get, "/exchange/entry", phone, (*Server).exchangeEntry, 0},
		{get, "/exchange/snapshot", phone, (*Server).exchangeSnapshot, 0},
		{get, "/exchange/head", phone, (*Server).exchangeHead, 0},
		{post, "/exchange/head", phone, (*Server).exchangeHeadTake, 0},

		// office: reading
		{get, "/", signed, (*Server).overviewShow, 0},
		{get, "/sites", signed, (*Server).sitesShow, 0},
		{get, "/sites/:site", signed, (*Server).siteShow, 0},
		{get, "/sites/:site/circuits", signed, (*Server).circuitsShow, 0},
		{get, "/sites/:site/protection", signed, (*Server).protectionShow, 0},
		{get, "/panels/:panel", signed, (*Server).panelShow, 0},
		{get, "/circuits/:circuit", signed, (*Server).circuitShow, 0},
		{get, "/devices/:device", signed, (*Server).deviceShow, 0},
		{get, "/entries/:entry", signed, (*Server).entryShow, 0},
		{get, "/entries/:entry/photos/:photo", signed, (*Server).photoShow, 0},
		{get, "/records/:entry/photos/:photo", signed, (*Server).photoShow, 0},
		{get, "/defects", signed, (*Server).defectsShow, 0},
		{get, "/defects/parts", signed, (*Server).partsShow, 0},
		{get, "/defects/past", signed, (*Server).pastShow, 0},
		{get, "/defects/:defect", signed, (*Server).defectShow, 0},
		{get, "/records/:record", signed, (*Server).recordShow, 0},
		{get, "/records/:record/seal", manager, (*Server).sealShow, 0},
		{get, "/dates", signed, (*Server).datesShow, 0},
		{get, "/rounds", signed, (*Server).roundsShow, 0},
		{get, "/rounds/:round", signed, (*Server).roundShow, 0},
		{get, "/reminders", signed, (*Server).remindersShow, 0},
		{post, "/reminders/calendar", signed | alone, (*Server).feedMake, 0},
		{post, "/reminders/calendar/revoke", signed | alone, (*Server).feedRevoke, 0},
		{post, "/reminders/digest", signed | alone, (*Server).digestUpdate, 0},
		{get, "/set-up", signed, (*Server).setupShow, 0},
		{get, "/compliance", signed, (*Server).complianceShow, 0},
		{get, "/sites/:site/calendar", signed, (*Server).calendarShow, 0},
		{get, "/plans", signed, (*Server).plansShow, 0},
		{get, "/plans/:plan", signed, (*Server).planShow, 0},
		{get, "/plans/:plan/marks", signed, (*Server).marksShow, 0},
		{get, "/sites/:site/asked", signed, (*Server).askedShow, 0},
		{get, "/limits/:set", signed, (*Server).limitsShow, 0},
		{get, "/forms/:kind/:task", signed, (*Server).formShow, 0},
		{get, "/downloads", office, (*Server).downloadsShow, 0},
		{get, "/workbook.xlsx", office, (*Server).workbookTake, 0},
		{post, "/workbook", office | alone, (*Server).workbookMake, 0},
		{get, "/workbook/:making", office, (*Server).makingShow, 0},
		{post, "/workbook/:making/stop", office | alone, (*Server).makingStop, 0},
		{get, "/workbook/:making/:file", office, (*Server).makingTake, 0},
		{post, "/bundle", office | alone, (*Server).bundleMake, 0},
		{get, "/bundle/:making", office, (*Server).makingShow, 0},
		{post, "/bundle/:making/stop", office | alone, (*Server).makingStop, 0},
		{get, "/bundle/:making/:file", office, (*Server).makingTake, 0},
		{get, "/bundle.zip", office, (*Server).bundleTake, 0},
		{get, "/sample", office, (*Server).sampleShow, 0},
		{get, "/sample.pdf", office, (*Server).sampleTake, 0},
		{get, "/labels", office, (*Server).labelsShow, 0},
		{get, "/labels.pdf", office, (*Server).labelsTake, 0},
		{get, "/label", office, (*Server).labelTake, 0},
		{get, "/table", office, (*Server).tableTake, 0},
		{get, "/round-sheet", office, (*Server).roundTake, 0},
		{get, "/statement.pdf", office, (*Server).statementTake, 0},
		{get, "/device-sheet", office, (*Server).sheetTake, 0},
		{get, "/notices", office, (*Server).noticesTake, 0},

		// a person's own signing in
		{get, "/privacy", signed, (*Server).privacyShow, 0},
		{get, "/privacy/data.json", signed, (*Server).privacyTake, 0},
		{get, "/me", signed, (*Server).meShow, 0},
		{post, "/me/password", signed | alone, (*Server).mePassword, 0},
		{post, "/me/second", signed | alone, (*Server).meSecondOffer, 0},
		{post, "/me/second/on", signed | alone, (*Server).meSecondOn, 0},
		{post, "/me/second/off", signed | alone, (*Server).meSecondOff, 0},
		{post, "/me/sessions", signed | alone, (*Server).meSessions, 0},
		{post, "/me/phones/:phone", signed | alone, (*Server).mePhoneOff, 0},

		// office: changing
		{get, "/tray", manager, (*Server).trayAsk, 0},
		{post, "/tray", manager, (*Server).trayTake, trayLimit},
		{get, "/sites/new", manager, (*Server).siteNew, 0},
		{post, "/sites", manager, (*Server).siteCreate, 0},
		{get, "/sites/:site/edit", manager, (*Server).siteEdit, 0},
		{post, "/sites/:site/edit", manager, (*Server).siteUpdate, 0},
		{get, "/sites/:site/devices/new", manager, (*Server).deviceNew, 0},
		{post, "/sites/:site/devices", manager, (*Server).deviceCreate, 0},
		{get, "/sites/:site/panels/new", manager, (*Server).panelNew, 0},
		{post, "/sites/:site/panels", manager, (*Server).panelCreate, 0},
		{get, "/panels/:panel/edit", manager, (*Server).panelEdit, 0},
		{post, "/panels/:panel/edit", manager, (*Server).panelUpdate, 0},
		{get, "/sites/:site/circuits/new", manager, (*Server).circuitNew, 0},
		{post, "/sites/:site/circuits", manager, (*Server).circuitCreate, 0},
		{get, "/circuits/:circuit/edit", manager, (*Server).circuitEdit, 0},
		{post, "/circuits/:circuit/edit", manager, (*Server).circuitUpdate, 0},
		{get, "/circuits/:circuit/order", manager, (*Server).orderEdit, 0},
		{post, "/circuits/:circuit/order", manager, (*Server).orderUpdate, 0},
		{get, "/usual-places", manager, (*Server).usualEdit, 0},
		{post, "/usual-places", manager, (*Server).usualUpdate, 0},
		{get, "/sites/:site/usual-places", manager, (*Server).usualEdit, 0},
		{post, "/sites/:site/usual-places", manager, (*Server).usualUpdate, 0},
		{get, "/devices/:device/edit", manager, (*Server).deviceEdit, 0},
		{post, "/devices/:device/edit", manager, (*Server).deviceUpdate, 0},
		{get, "/devices/:device/same", manager, (*Server).itemSameAsk, 0},
		{post, "/devices/:device/same", manager, (*Server).itemSame, 0},
		{get, "/devices/:device/retire", manager, (*Server).deviceRetireAsk, 0},
		{post, "/devices/:device/retire", manager, (*Server).deviceRetire, 0},
		{get, "/devices/:device/defects/new", manager, (*Server).defectNew, 0},
		{post, "/devices/:device/defects", manager, (*Server).defectOpen, attachLimit},
		{get, "/defects/:defect/:act", manager, (*Server).defectActAsk, 0},
		{post, "/defects/:defect/:act", manager, (*Server).defectAct, attachLimit},
		{get, "/entries/:entry/correct", manager, (*Server).entryCorrectAsk, 0},
		{post, "/entries/:entry/correct", manager, (*Server).entryCorrect, 0},
		{post, "/labels/batch", manager, (*Server).labelsBatch, 0},
		{get, "/plans/new", manager, (*Server).planNew, 0},
		{post, "/plans", manager, (*Server).planPreview, 0},
		{get, "/plans/:plan/edit", manager, (*Server).planEdit, 0},
		{post, "/plans/:plan/edit", manager, (*Server).planPreview, 0},
		{get, "/sites/:site/occasion", manager, (*Server).occasionNew, 0},
		{post, "/sites/:site/occasion", manager, (*Server).occasionCreate, 0},
		{get, "/sites/:site/pause", manager, (*Server).pauseNew, 0},
		{post, "/sites/:site/pause", manager, (*Server).pauseCreate, 0},
		{get, "/limits/:set/edit", manager, (*Server).limitsEdit, 0},
		{post, "/limits/:set/edit", manager, (*Server).limitsPreview, 0},
		{get, "/forms/:kind/:task/edit", manager, (*Server).formEdit, 0},
		{post, "/forms/:kind/:task/edit", manager, (*Server).formPreview, 0},
		{post, "/revisions", manager, (*Server).revisionAccept, 0},
		{get, "/rounds/new", office, (*Server).roundNew, 0},
		{post, "/rounds", manager, (*Server).roundCreate, mappingLimit},
		{get, "/rounds/:round/edit", manager, (*Server).roundEdit, 0},
		{post, "/rounds/:round/edit", manager, (*Server).roundUpdate, 0},
		{post, "/rounds/:round/accept", manager, (*Server).roundAccept, 0},
		{get, "/instruments/new", manager, (*Server).instrumentNew, 0},
		{post, "/instruments", manager, (*Server).instrumentCreate, 0},
		{get, "/instruments/:instrument/past", signed, (*Server).instrumentShow, 0},
		{get, "/instruments/:instrument/certificate", manager, (*Server).certificateAsk, 0},
		{post, "/instruments/:instrument/certificate", manager, (*Server).certificateTake, attachLimit},
		{get, "/instruments/:instrument/certificates/:record", signed, (*Server).certificateFile, 0},
		{get, "/instruments/:instrument/proved", manager, (*Server).provedAsk, 0},
		{post, "/instruments/:instrument/proved", manager, (*Server).provedTake, 0},
		{get, "/instruments/:instrument/recall/:record", office, (*Server).recallShow, 0},
		{post, "/instruments/:instrument/recall/:record", manager, (*Server).recallTake, 0},
		{get, "/instruments/:instrument", manager, (*Server).instrumentEdit, 0},
		{post, "/instruments/:instrument", manager, (*Server).instrumentUpdate, 0},
		{get, "/import", manager, (*Server).importNew, 0},
		{post, "/import", manager, (*Server).importTake, uploadBytes + mappingLimit},
		{post, "/import/columns", manager, (*Server).importColumnsDrop, 0},
		{get, "/import/:upload", manager, (*Server).importShow, 0},
		{post, "/import/:upload", manager, (*Server).importMend, mappingLimit},
		{get, "/import/:upload/:file", manager, (*Server).importFile, 0},
		{get, "/mail", manager, (*Server).mailEdit, 0},
		{post, "/mail", manager, (*Server).mailUpdate, 0},
		{get, "/kept-aside", manager, (*Server).asideShow, 0},
		{post, "/kept-aside", manager, (*Server).asideAdmit, 0},
		{post, "/kept-aside/head", manager, (*Server).asideHead, 0},
		{get, "/results", manager, (*Server).resultsNew, 0},
		{post, "/results", manager, (*Server).resultsTake, uploadBytes + mappingLimit},
		{post, "/results/columns", manager, (*Server).resultsColumnsDrop, 0},
		{get, "/results/:upload", manager, (*Server).resultsShow, 0},
		{post, "/results/:upload", manager, (*Server).resultsMend, mappingLimit},
		{get, "/results/:upload/:file", manager, (*Server).resultsFile, 0},
		{get, "/people", manager, (*Server).peopleShow, 0},
		{get, "/people/new", manager, (*Server).personNew, 0},
		{post, "/people", manager, (*Server).personCreate, 0},
		{get, "/people/:person", manager, (*Server).personShow, 0},
		{get, "/people/:person/edit", manager, (*Server).personEdit, 0},
		{post, "/people/:person", manager, (*Server).personUpdate, 0},
		{get, "/people/:person/remove", manager, (*Server).personRemoveAsk, 0},
		{post, "/people/:person/remove", manager, (*Server).personRemove, 0},
		{post, "/people/:person/link", manager, (*Server).personLink, 0},
		{post, "/people/:person/code", manager, (*Server).personCode, 0},
		{post, "/people/:person/sessions", manager, (*Server).personSessions, 0},
		{get, "/people/:person/end", manager, (*Server).personEndAsk, 0},
		{post, "/people/:person/end", manager, (*Server).personEnd, 0},
		{get, "/people/:person/phones/:phone", manager, (*Server).personPhoneAsk, 0},
		{post, "/people/:person/phones/:phone", manager, (*Server).personPhoneOff, 0},
	}
}

// plainRoutes is everything that is answered over http beside the TLS of the house's own authority.
func plainRoutes() []route {
	return []route{
		{get, "/", anyone, (*Server).trustShow, 0},
		{get, "/" + certificateName, anyone, (*Server).trustCertificate, 0},
		{get, "/" + profileName, anyone, (*Server).trustProfile, 0},
		{get, "/assets/*", anyone, (*Server).assetShow, 0},
		{get, "/*", anyone, (*Server).trustElsewhere, 0},
	}
}
