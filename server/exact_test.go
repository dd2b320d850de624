package server

import (
	"encoding/json"
	"testing"

	v2 "github.com/go-json-experiment/json"
	"github.com/go-json-experiment/json/jsontext"
)

func TestExactText_KeepsEveryByte(t *testing.T) {
	type holder struct {
		Record exactText `json:"record"`
	}
	for _, c := range []struct{ wire, want string }{
		{`"plain"`, "plain"},
		{`""`, ""},
		{`"a\"b\\c\/d\b\f\n\r\t"`, "a\"b\\c/d\b\f\n\r\t"},
		{`"\u00e9\u00E9\u20ac"`, "éé€"},
		{`"\ud83d\ude00"`, "😀"},
		{`"\ud83d"`, "\xed\xa0\xbd"},
		{`"\ud83dx\ud83d\u0041"`, "\xed\xa0\xbdx\xed\xa0\xbdA"},
		{"\"bad \xff\xfe byte\"", "bad \xff\xfe byte"},
	} {
		var got holder
		if err := v2.Unmarshal([]byte(`{"record":`+c.wire+`}`), &got, jsontext.AllowInvalidUTF8(true)); err != nil {
			t.Errorf("%s: %v", c.wire, err)
			continue
		}
		if string(got.Record) != c.want {
			t.Errorf("%s: got %q, want %q", c.wire, got.Record, c.want)
		}
	}
}

func FuzzExactText(f *testing.F) {
	for _, s := range []string{"", "plain", "é\u2028", "\"\\\b", "\x00\x1f", "😀"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		wire, err := json.Marshal(s)
		if err != nil {
			t.Skip()
		}
		var want string
		if err := json.Unmarshal(wire, &want); err != nil {
			t.Skip()
		}
		var got exactText
		if err := got.UnmarshalJSON(wire); err != nil || string(got) != want {
			t.Errorf("%s: got %q, want %q (%v)", wire, got, want, err)
		}
	})
}
