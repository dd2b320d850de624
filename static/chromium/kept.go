package chromium

import (
	"encoding/json"
	"fmt"

	"github.com/chromedp/cdproto/storage"
	"github.com/chromedp/chromedp"
)

// Rows reads every row of one store of an IndexedDB database, as the browser keeps it, into a list. What JSON has no word for
// (the bytes of a photo) is left out.
func (w *Window) Rows(database, store string, into any) {
	w.T.Helper()
	w.read(database, store, "getAll()", into)
}

// Row reads the value under one key of such a store.
func (w *Window) Row(database, store, key string, into any) {
	w.T.Helper()
	w.read(database, store, "get("+Quote(key)+")", into)
}

func (w *Window) read(database, store, ask string, into any) {
	w.T.Helper()
	raw := w.Value(fmt.Sprintf(`new Promise((yes, no) => { const open = indexedDB.open(%q); open.onerror = () => no(open.error);
		open.onsuccess = () => { const got = open.result.transaction(%q).objectStore(%q).%s; got.onerror = () => no(got.error);
			got.onsuccess = () => { open.result.close(); yes(JSON.stringify(got.result ?? null)); }; }; })`, database, store, store, ask))
	if err := json.Unmarshal([]byte(raw), into); err != nil {
		w.Fail("%s of %s: %v", store, database, err)
	}
}

// Room leaves an origin so many bytes for all it keeps; 0 gives it back what it had.
func (w *Window) Room(origin string, bytes float64) {
	w.T.Helper()
	params := storage.OverrideQuotaForOriginParams{Origin: origin}
	if bytes > 0 {
		params.QuotaSize = &bytes
	}
	if _, err := chromedp.Call(w.Ctx, storage.OverrideQuotaForOrigin, params); err != nil {
		w.Fail("room for %s: %v", origin, err)
	}
}

// DropDatabases has the browser close the connections of all pages to their databases, as phones do to pages that were long in the
// background: through the browser's own page for it.
func (w *Window) DropDatabases() {
	w.T.Helper()
	inside := w.Tab()
	inside.Open("chrome://indexeddb-internals")
	inside.Until("the databases", `(globalThis.drops = [], (function walk(n) { for (const e of n.querySelectorAll("*")) { if (e.matches(".force-close")) drops.push(e); if (e.shadowRoot) walk(e.shadowRoot); } })(document), drops.length > 0)`)
	inside.JS(`drops.forEach((e) => e.click())`)
	inside.Until("the connections closed", `!/Open connections:\s*[1-9]/.test(document.body.innerText)`)
	inside.Close()
}
