package record

import (
	"strings"
	"testing"
	"time"
)

func TestTag_CheckCharacter(t *testing.T) {
	// ISO 7064, MOD 37,36: worked example of the standard (a donation number).
	if got := checkCharacter("A12425GABC1234002"); got != 'M' {
		t.Errorf("got %c, want M", got)
	}
}

func TestTag_FoundAgainHoweverTyped(t *testing.T) {
	drawn := 0
	for bits := uint32(1); drawn < 2000; bits = bits*1664525 + 1013904223 {
		tag, ok := DrawTag(bits)
		if strings.ContainsAny(tag[:6], "ILOU") {
			t.Fatalf("%s holds a letter that looks like another", tag)
		}
		if !ok {
			continue
		}
		drawn++
		// Crockford base 32: I and L are read as 1, O as 0, case and hyphens say nothing.
		typed := strings.NewReplacer("1", "l", "0", "o").Replace(strings.ToLower(tag))
		for _, s := range []string{tag, typed, ShowTag(tag), tag[:3] + "-" + tag[3:], TagAddress("https://Host.example/", tag), "https://elsewhere/t/" + typed + "?x=1"} {
			if got, ok := ParseTag(s); !ok || got != tag {
				t.Fatalf("%q: got %q %v, want %s", s, got, ok, tag)
			}
		}
		for i := range 7 { // every single wrong character is noticed (ISO 7064: all single substitutions)
			wrong := []byte(tag)
			for _, c := range []byte(crockford) {
				if c != tag[i] {
					wrong[i] = c
					if IsTag(string(wrong)) {
						t.Fatalf("%s was taken for %s", wrong, tag)
					}
				}
			}
		}
	}
}

func TestID_RFC9562(t *testing.T) {
	at := time.UnixMilli(0x017F22E279B0) // RFC 9562, A.6: the example of version 7
	id := NewID(at, [10]byte{0x0C, 0xC3, 0x18, 0xC4, 0xDC, 0x0C, 0x0C, 0x07, 0x39, 0x8F})
	if id != "017f22e2-79b0-7cc3-98c4-dc0c0c07398f" {
		t.Errorf("got %s, want 017f22e2-79b0-7cc3-98c4-dc0c0c07398f", id)
	}
	named := NamedID("org", "site", "row 1")
	if !IsID(named) || !IsNamed(named) || IsNamed(id) || named == NamedID("org", "siterow 1") {
		t.Errorf("%s is no good version 8 id", named)
	}
	b, ok := IDBytes(id)
	if !ok || IDText(b[:]) != id {
		t.Errorf("got %s back, want %s", IDText(b[:]), id)
	}
}

func TestClock(t *testing.T) {
	at := time.UnixMilli(5)
	for _, c := range []struct{ last, want uint64 }{{0, 5 << 16}, {5 << 16, 5<<16 + 1}, {9 << 16, 9<<16 + 1}, {MaxClock, MaxClock}} {
		if got := NextClock(c.last, at); got != c.want {
			t.Errorf("after %x: got %x, want %x", c.last, got, c.want)
		}
	}
	if got := ClockText(5 << 16); got != "0000000000050000" {
		t.Errorf("got %s", got)
	}
}

func TestWrite_ReadsBack(t *testing.T) {
	at := time.Date(2026, 12, 1, 9, 30, 0, 5e6, time.FixedZone("", -5*3600))
	id := NamedID("x")
	raw := Write(Record{ID: id, Kind: "entry.made", V: 1, Log: id, Subject: id, At: at, Clock: 77, By: id, From: id, N: 3, Body: []byte(`{"form":"rcd/button","readings":{}}`)})
	r, f := Parse(raw)
	if f != nil {
		t.Fatal(f)
	}
	if !r.At.Equal(at) || r.AtText != "2026-12-01T09:30:00.005-05:00" || r.Clock != 77 || r.N != 3 {
		t.Errorf("got %+v", r)
	}
	st := Stamp{Received: at.UTC(), OffsetMS: -12, Via: `a"b`, Held: []Held{{Store: id, Received: at.Add(-time.Hour).UTC()}}}
	back, err := ParseStamp(st.Line())
	if err != nil || back.OffsetMS != -12 || back.Via != st.Via || !back.Earliest().Equal(at.Add(-time.Hour)) {
		t.Errorf("got %+v %v from %s", back, err, st.Line())
	}
}
