package bundle

import (
	"context"
	"fmt"
	"io"

	"tripwell/export/paper"
	"tripwell/forms"
	"tripwell/store"
)

// Draw draws a sample from the register of a bundle as it stood when the bundle was made, with the head of the bundle and a word
// of the auditor's. Records that do not agree with the head are *store.Error code conflict: a sample from them would be worth
// nothing.
func Draw(ctx context.Context, in io.ReaderAt, size int64, key string, ask paper.SampleAsk) (sample paper.Sample, err error) {
	var report Report
	v, err := newVerifier(ctx, in, size, Check{Key: key}, &report)
	if err != nil {
		return sample, err
	}
	if err := v.run(v.proofs()); err != nil {
		return sample, err
	}
	if n := len(report.Findings) + report.More; n > 0 {
		return sample, &store.Error{Code: "conflict", Field: "bundle", Text: fmt.Sprintf("The bundle does not prove itself (%s: %s), so nothing is drawn from it. Check it first: tripwell verify.", report.Findings[0].Where, report.Findings[0].Text)}
	}
	ask.Head = v.head
	err = replayed(ctx, v.doc, v.people, v.inOrder(), nil, func(view *store.View) error {
		sample, err = paper.SampleOf(view, forms.DayOf(v.doc.AsOf), ask, v.doc.Demo)
		return err
	})
	return sample, err
}
