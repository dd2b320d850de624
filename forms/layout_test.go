package forms

import (
	"bytes"
	"encoding/json"
	"strings"
	"testing"
)

func TestLayout_ChangesNothingButSpace(t *testing.T) {
	for _, f := range Shipped().Forms {
		checkLayout(t, f.ID, f)
	}
	for _, s := range Shipped().LimitSets {
		checkLayout(t, s.ID, s)
	}
}

func checkLayout(t *testing.T, id string, v any) {
	t.Helper()
	raw, err := json.Marshal(v)
	if err != nil {
		t.Fatal(err)
	}
	laid, err := Layout(raw)
	if err != nil {
		t.Fatal(err)
	}
	var compact bytes.Buffer
	if err := json.Compact(&compact, laid); err != nil || !sameJSON(compact.Bytes(), raw) {
		t.Errorf("%s came back as\n%s\nwant\n%s (%v)", id, compact.Bytes(), raw, err)
	}
	again, err := Layout(laid)
	if err != nil || !bytes.Equal(again, laid) {
		t.Errorf("%s: laid out twice it differs (%v)", id, err)
	}
	if n := strings.Count(string(laid), "\n"); n < 12 {
		t.Errorf("%s stands on %d lines:\n%s", id, n, laid)
	}
}

// sameJSON compares compact JSON without regard to how < > & are written.
func sameJSON(a, b []byte) bool {
	for _, esc := range []struct{ long, short string }{{`\u003c`, "<"}, {`\u003e`, ">"}, {`\u0026`, "&"}} {
		b = bytes.ReplaceAll(b, []byte(esc.long), []byte(esc.short))
	}
	return bytes.Equal(a, b)
}
