package forms

import (
	"encoding/json"
	"io/fs"
	"path"
	"slices"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
)

func TestShipped_FilesAndListsAgree(t *testing.T) {
	for dir, list := range map[string][]string{"data/forms": shippedForms, "data/limits": shippedLimitSets} {
		files, err := fs.ReadDir(shippedData, dir)
		if err != nil {
			t.Fatal(err)
		}
		if len(files) != len(list) {
			t.Errorf("%s holds %d files, the list %d", dir, len(files), len(list))
		}
		for _, f := range files {
			if id := strings.TrimSuffix(f.Name(), ".json"); !slices.Contains(list, id) {
				t.Errorf("%s/%s is in no list", dir, f.Name())
			}
		}
	}
}

// What the types keep of a file must be all of it: what they dropped would never reach a phone.
func TestShipped_NothingIsLostInTheTypes(t *testing.T) {
	check := func(name string, decoded any) {
		t.Helper()
		raw, err := shippedData.ReadFile(name)
		if err != nil {
			t.Fatal(err)
		}
		again, err := json.Marshal(decoded)
		if err != nil {
			t.Fatal(err)
		}
		var want, got any
		if err := json.Unmarshal(raw, &want); err != nil {
			t.Fatal(err)
		}
		if err := json.Unmarshal(again, &got); err != nil {
			t.Fatal(err)
		}
		if diff := cmp.Diff(want, got); diff != "" {
			t.Errorf("%s (-file +type):\n%s", name, diff)
		}
	}
	for i, f := range Shipped().Forms {
		check(path.Join("data/forms", shippedForms[i]+".json"), f)
	}
	for i, s := range Shipped().LimitSets {
		check(path.Join("data/limits", shippedLimitSets[i]+".json"), s)
	}
	check("data/plans.json", Shipped().Plans)
}

// Every name in the data must mean something.
func TestShipped_NamesAreKnown(t *testing.T) {
	condition := func(where string, cs []Condition) {
		for _, c := range cs {
			if (c.Reading == "") == (c.Field == "") {
				t.Errorf("%s: a condition names a reading or a field: %+v", where, c)
			}
			if _, ok := CodeOf(c.Reading); c.Reading != "" && !ok {
				t.Errorf("%s: condition on unknown reading %q", where, c.Reading)
			}
		}
	}
	for _, f := range Shipped().Forms {
		if f.Revision != 1 || f.InForce.String() != "1900-01-01" {
			t.Errorf("%s: revision %d in force %s", f.ID, f.Revision, f.InForce)
		}
		if _, ok := Shipped().LimitSet(f.LimitSet); !ok {
			t.Errorf("%s: no limit set %q", f.ID, f.LimitSet)
		}
		for _, kind := range f.Kinds {
			if !slices.Contains(Kinds(), kind) {
				t.Errorf("%s: unknown kind %q", f.ID, kind)
			}
		}
		f.asks(func(a ask) bool {
			c, ok := CodeOf(a.Reading)
			if !ok || c.Type != a.Type || a.Unit != c.Unit {
				t.Errorf("%s: ask %+v is not the code %+v", f.ID, *a.Ask, c)
			}
			for _, o := range append(slices.Clone(a.Options), a.Ends...) {
				if !slices.Contains(c.Options, o) {
					t.Errorf("%s: %s has no answer %q", f.ID, a.Reading, o)
				}
			}
			for _, u := range a.Units {
				if _, ok := perUnit(c.Unit, u); !ok {
					t.Errorf("%s: %s cannot be typed in %q", f.ID, a.Reading, u)
				}
			}
			for _, r := range a.OfferMissing {
				if !slices.Contains(MissingReasons(), r) {
					t.Errorf("%s: %s offers the unknown reason %q", f.ID, a.Reading, r)
				}
			}
			condition(f.ID, a.When)
			condition(f.ID, a.step.ClosedUnless)
			condition(f.ID, a.step.ClosedWhen)
			return true
		})
	}
	for _, s := range Shipped().LimitSets {
		ids := map[string]bool{}
		for _, l := range s.Limits {
			where := s.ID + " " + l.ID
			if ids[l.ID] {
				t.Errorf("%s: id used twice", where)
			}
			ids[l.ID] = true
			if l.Level != Must && l.Level != WatchOnly {
				t.Errorf("%s: level %q", where, l.Level)
			}
			if l.Source == "" || l.Status == "" || l.Text == "" {
				t.Errorf("%s: wants source, status and text", where)
			}
			if c, ok := CodeOf(l.Reading); l.Field == "" && (!ok || l.Unit != "" && l.Unit != c.Unit) {
				t.Errorf("%s: reading %q in %q", where, l.Reading, l.Unit)
			}
			condition(where, l.When)
			for _, v := range l.Void {
				condition(where, v.When)
			}
		}
	}
}
