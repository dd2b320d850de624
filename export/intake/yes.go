package intake

import "strings"

// answers are the ways people say yes and no in a cell. A lone x ticks; the crosses made for it say no.
var answers = map[string]bool{
	"y": true, "yes": true, "true": true, "t": true, "1": true, "ok": true, "okay": true, "x": true, "✓": true, "✔": true, "☑": true, "√": true, "✅": true, "pass": true, "passed": true,
	"on": true, "si": true, "sí": true, "ja": true, "j": true, "oui": true,
	"n": false, "no": false, "false": false, "f": false, "0": false, "✗": false, "✘": false, "☐": false, "❌": false, "fail": false, "failed": false, "none": false, "off": false,
	"nein": false, "non": false, "not ok": false, "nok": false,
}

// ParseYes reads an answer of yes or no: Y, N, yes, no, ✓, ✗, x, OK, TRUE, FALSE, 1, 0. ok is false for everything else.
func ParseYes(text string) (yes, ok bool) {
	s := strings.ToLower(strings.TrimRight(strings.TrimSpace(text), ".!"))
	s = strings.TrimSuffix(s, "\ufe0f") // the mark that asks for a coloured picture
	yes, ok = answers[s]
	return yes, ok
}
