package export

import (
	"tripwell/forms"
	"tripwell/store"
)

// judge gives the verdict of a body that is no longer in force, under the limits its entry was judged with.
func (r *entryReader) judge(body forms.Entry, e store.Entry) forms.Verdict {
	return forms.Verdict{}
}
