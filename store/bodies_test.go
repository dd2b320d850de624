package store

import (
	"fmt"
	"testing"

	"tripwell/forms"
	"tripwell/store/record"
)

func TestVerdicts_AreTakenOverOnlyForTheSameRules(t *testing.T) {
	form, set, k := &forms.Form{}, &forms.LimitSet{}, &verdicts{}
	if _, ok := k.knows(form, set); ok {
		t.Error("nothing worked out: a verdict came")
	}
	k.note(form, set, forms.Verdict{Result: forms.Pass})
	if v, ok := k.knows(form, set); !ok || v.Result != forms.Pass {
		t.Errorf("same rules: got %v, %v; want the verdict", v, ok)
	}
	if _, ok := k.knows(form, &forms.LimitSet{}); ok {
		t.Error("another revision of the limits: the old verdict was taken over")
	}
	if _, ok := k.knows(&forms.Form{}, set); ok {
		t.Error("another revision of the form: the old verdict was taken over")
	}
	if _, ok := (*verdicts)(nil).knows(form, set); ok {
		t.Error("no place for verdicts: one came")
	}
}

func TestBodies_AreSharedWhereTheySayTheSame(t *testing.T) {
	read := func(b *bodies, volts int) *entryBody {
		r := &record.Record{Kind: "entry.made", Body: fmt.Appendf(nil, `{"form":"receptacle/test","readings":{"voltage_v":%d}}`, volts)}
		b.read(r)
		body, _ := r.Read.(*entryBody)
		if v, _ := body.Readings["voltage_v"].Float(); int(v) != volts {
			t.Fatalf("%d V came back as %v", volts, body.Readings)
		}
		return body
	}
	b := newBodies()
	usual := read(b, 1)
	for volts := 2; volts < 4*bodiesMost; volts++ {
		read(b, volts)
		if volts%100 == 0 && read(b, 1) != usual {
			t.Fatalf("what is still being said was read again after %d others", volts)
		}
	}
	if held := len(b.newer) + len(b.older); held > 2*bodiesMost {
		t.Errorf("%d bodies are held, at most %d may be", held, 2*bodiesMost)
	}
}
