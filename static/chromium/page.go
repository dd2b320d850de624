package chromium

import (
	"encoding/json"
	"time"

	"github.com/chromedp/chromedp"
)

// patience bounds every wait: a loaded machine is slow, and a wait that ends early would be a test of its speed.
const patience = 30 * time.Second

// Until waits until an expression is true on the page, across navigations.
func (w *Window) Until(what, expression string) {
	w.T.Helper()
	for end := time.Now().Add(patience); time.Now().Before(end); time.Sleep(30 * time.Millisecond) {
		if ok, err := chromedp.Run(w.Ctx, chromedp.Evaluate[bool]("Boolean("+expression+")")); err == nil && ok {
			return
		}
	}
	w.Fail("waited %v for %s", patience, what)
}

// Sees waits until the page says a text.
func (w *Window) Sees(text string) {
	w.T.Helper()
	w.Until(text, `document.body.innerText.includes(`+Quote(text)+`)`)
}

// JS gives the value of an expression on the page.
func (w *Window) JS(expression string) any {
	w.T.Helper()
	v, err := chromedp.Run(w.Ctx, chromedp.Evaluate[any](expression))
	if err != nil {
		w.Fail("%s: %v", expression, err)
	}
	return v
}

// Value gives the text an expression stands for, a promise's when it is settled.
func (w *Window) Value(expression string) string {
	w.T.Helper()
	v, err := chromedp.Run(w.Ctx, chromedp.Evaluate[string](expression, chromedp.EvalAwaitPromise))
	if err != nil {
		w.Fail("%s: %v", expression, err)
	}
	return v
}

// Text gives the visible text of the first element a selector finds.
func (w *Window) Text(selector string) string {
	w.T.Helper()
	s, _ := w.JS(`document.querySelector(` + Quote(selector) + `)?.innerText ?? ""`).(string)
	return s
}

// Tap takes the first element of a selector whose text begins so, wherever it lies on the page; "" is any.
func (w *Window) Tap(selector, begins string) {
	w.T.Helper()
	find := `[...document.querySelectorAll(` + Quote(selector) + `)].find((e) => e.innerText.trim().startsWith(` + Quote(begins) + `))`
	w.Until(selector+" "+begins, find)
	w.Until("a tap on "+begins, `(`+find+`.click(), true)`)
}

// Press clicks, as a finger does, on the first visible button or link within a selector that has the text; "" is any.
func (w *Window) Press(within, text string) {
	w.T.Helper()
	find := `[...document.querySelectorAll(` + Quote(within) + `)].flatMap((e) => e.matches("button, a, summary") ? [e] : [...e.querySelectorAll("button, a, summary")])
		.find((e) => (` + Quote(text) + ` === "" || e.textContent.replace(/\s+/g, " ").includes(` + Quote(text) + `)) && e.getClientRects().length > 0)`
	w.Until("a button "+within+" "+text, find)
	// The place to press is taken when the page stands still and nothing lies over it.
	still := `(() => { const e = ` + find + `; e.scrollIntoView({block: "center", behavior: "instant"});
		const r = e.getClientRects()[0], x = r.x + r.width / 2, y = r.y + r.height / 2, at = x + "," + y, was = globalThis.pressAt;
		globalThis.pressAt = at;
		return was === at && e.contains(document.elementFromPoint(x, y)) ? [x, y] : null; })()`
	for end := time.Now().Add(patience); time.Now().Before(end); time.Sleep(50 * time.Millisecond) {
		if at, ok := w.JS(still).([]any); ok {
			w.Do(chromedp.MouseClickXY(at[0].(float64), at[1].(float64)))
			return
		}
	}
	w.Fail("%s %q does not come to rest or is covered", within, text)
}

// Type types into the field a selector finds.
func (w *Window) Type(selector, typed string) {
	w.T.Helper()
	w.Until("a field "+selector, `document.querySelector(`+Quote(selector)+`)`)
	w.Do(chromedp.SendKeys(chromedp.CSS(selector), typed))
}

// Hand gives files to the field a selector finds, as the camera or the file window does.
func (w *Window) Hand(selector string, files ...string) {
	w.T.Helper()
	w.Until("a field "+selector, `document.querySelector(`+Quote(selector)+`)`)
	w.Do(chromedp.SetUploadFiles(chromedp.CSS(selector), files))
}

// Quote writes a text as JavaScript reads it.
func Quote(s string) string {
	raw, _ := json.Marshal(s) // a text is always JSON
	return string(raw)
}
