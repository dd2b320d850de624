package export

import (
	"tripwell/forms"
	"tripwell/store"
)

// judge gives the verdict of a body that is no longer in force, under the limits its entry was judged with. What cannot
// be judged any more (an unknown form or revision) keeps its readings and has no verdict.
func (r *entryReader) judge(body forms.Entry, e store.Entry) forms.Verdict {
	form, set := r.forms[body.Form], r.sets[limitRevision(e.LimitSet, e.LimitRev)]
	if form == nil || set == nil {
		return forms.Verdict{}
	}
	v, err := forms.Judge(form, set, body)
	if err != nil {
		return forms.Verdict{}
	}
	return v
}
