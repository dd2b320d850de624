package store

import (
	"testing"

	"tripwell/forms"
	"tripwell/store/record"
)

func TestReady_IsTakenOverOnlyForTheSameRecordAndRules(t *testing.T) {
	form, set, r := &forms.Form{}, &forms.LimitSet{}, &record.Record{}
	k := &ready{r: r, form: form, set: set, verdict: forms.Verdict{Result: forms.Pass}, judged: true}
	if v, ok := k.knows(form, set); !ok || v.Result != forms.Pass {
		t.Errorf("same rules: got %v, %v; want the verdict", v, ok)
	}
	if _, ok := k.knows(form, &forms.LimitSet{}); ok {
		t.Error("another revision of the limits: the old verdict was taken over")
	}
	if _, ok := k.knows(&forms.Form{}, set); ok {
		t.Error("another revision of the form: the old verdict was taken over")
	}
	if _, ok := (*ready)(nil).knows(form, set); ok {
		t.Error("nothing worked out: a verdict came")
	}
	f := &fold{ready: k}
	if f.readyFor(&record.Record{}) != nil || f.readyFor(r) != k {
		t.Error("what is known of one record is given for another")
	}
}
