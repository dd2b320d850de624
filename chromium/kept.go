package chromium

import (
	"encoding/json"
	"fmt"
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
