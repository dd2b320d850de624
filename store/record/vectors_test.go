package record

import (
	"encoding/json"
	"os"
	"strconv"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

func readVectors(t *testing.T, name string, into any) {
	t.Helper()
	raw, err := os.ReadFile("../../testdata/" + name)
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(raw, into); err != nil {
		t.Fatalf("%s: %v", name, err)
	}
}

func TestParse_Vectors(t *testing.T) {
	var vectors []struct {
		Name, Line, Code, Field string
		Pad                     int
	}
	readVectors(t, "records.json", &vectors)
	for _, v := range vectors {
		t.Run(v.Name, func(t *testing.T) {
			line := strings.Replace(v.Line, "PAD", strings.Repeat("x", v.Pad), 1)
			r, f := Parse([]byte(line))
			got, field := "ok", ""
			if f != nil {
				got, field = f.Code, f.Field
				if !strings.HasSuffix(f.Text, ".") || len(f.Text) < 20 {
					t.Errorf("says %q, want a sentence", f.Text)
				}
			}
			if got != v.Code {
				t.Fatalf("got %s (%v), want %s", got, f, v.Code)
			}
			if v.Field != "" && field != v.Field {
				t.Errorf("got field %q, want %q", field, v.Field)
			}
			if f == nil && string(r.Raw) != line {
				t.Error("the bytes were changed")
			}
		})
	}
}

func TestParse_BytesThatAreNoUTF8(t *testing.T) {
	line := `{"note":"` + "\xff" + `"}`
	if _, f := Parse([]byte(line)); f == nil || f.Code != "malformed" {
		t.Errorf("got %v, want malformed", f)
	}
}

func TestWeigh_Vectors(t *testing.T) {
	var vectors []struct {
		Name string
		Said []struct {
			Value           json.RawMessage
			Clock, ID, From string
			Seen            string
		}
		Winner string
		Losers []string
	}
	readVectors(t, "merge.json", &vectors)
	for _, v := range vectors {
		var said []Said
		for _, s := range v.Said {
			clock, err := strconv.ParseUint(s.Clock, 16, 64)
			if err != nil {
				t.Fatal(err)
			}
			seen, err := strconv.ParseUint(s.Seen, 16, 64)
			if err != nil {
				t.Fatal(err)
			}
			said = append(said, Said{Value: s.Value, Clock: clock, ID: s.ID, From: s.From, Seen: seen})
		}
		for i := range said {
			order := Weigh(append(append([]Said{}, said[i:]...), said[:i]...))
			if order[0].ID != v.Winner {
				t.Errorf("%s: got winner %s, want %s", v.Name, order[0].ID, v.Winner)
			}
			var lost []string
			for _, l := range Losers(order) {
				lost = append(lost, l.ID)
			}
			if strings.Join(lost, " ") != strings.Join(v.Losers, " ") {
				t.Errorf("%s: got losers %v, want %v", v.Name, lost, v.Losers)
			}
		}
	}
}

func TestWeigh_OrderOfArrivalHasNoSay(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		said := rapid.SliceOfN(rapid.Custom(func(t *rapid.T) Said {
			clock := rapid.Uint64Range(1, 6).Draw(t, "clock")
			id := strconv.Itoa(rapid.IntRange(1, 9).Draw(t, "id"))
			// One record says one thing: everything else of a saying follows from its id and clock.
			return Said{Value: json.RawMessage(strconv.Itoa(int(clock) % 3)), Clock: clock, ID: id + "/" + strconv.Itoa(int(clock)), From: id, Seen: clock / 2}
		}), 1, 12).Draw(t, "said")
		shuffled := rapid.Permutation(said).Draw(t, "shuffled")
		a, b := Weigh(append([]Said{}, said...)), Weigh(append([]Said{}, shuffled...))
		one, _ := json.Marshal(a)
		two, _ := json.Marshal(b)
		if string(one) != string(two) {
			t.Fatalf("got %s and %s", one, two)
		}
	})
}

// The kinds a phone checks against are those of the store.
func TestKinds_SameInJavaScript(t *testing.T) {
	module, err := os.ReadFile("../../static/record.mjs")
	if err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(string(module), "export const kindTable = `"+kindTable+"`") {
		t.Error("static/record.mjs does not carry the lines of kinds.go")
	}
}

func FuzzParse(f *testing.F) {
	var vectors []struct{ Line string }
	raw, err := os.ReadFile("../../testdata/records.json")
	if err != nil {
		f.Fatal(err)
	}
	if err := json.Unmarshal(raw, &vectors); err != nil {
		f.Fatal(err)
	}
	for _, v := range vectors {
		f.Add([]byte(v.Line))
	}
	f.Fuzz(func(t *testing.T, line []byte) {
		r, fault := Parse(line) // must not panic
		if fault != nil {
			return
		}
		again, fault := Reread(r.Raw)
		if fault != nil || again.ID != r.ID || again.Clock != r.Clock || again.N != r.N {
			t.Fatalf("read again: %+v %v, want %+v", again, fault, r)
		}
		if !json.Valid(line) {
			t.Fatal("took what is no JSON")
		}
	})
}
