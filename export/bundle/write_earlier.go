package bundle

import (
	"cmp"
	"slices"

	"tripwell/store"
	"tripwell/store/proof"
)

// Bounds of earlier.json: so many heads, and of an organisation with many sites so many lines of all heads together, which whoever
// checks has to hold at once.
const (
	earlierMost      = 2000
	earlierLinesMost = 120_000
)

// signedEarlier is a head signed before, in the order of the book.
type signedEarlier struct {
	epoch int
	seq   uint64
	prove func() (earlier, error)
}

// earlier writes the heads signed before, with what they cover of these logs.
func (w *writer) earlier() error {
	signed, err := w.view.KeptHeads()
	if err != nil {
		return err
	}
	former, err := w.view.FormerHeads()
	if err != nil {
		return err
	}
	var list []signedEarlier
	for _, k := range signed {
		list = append(list, signedEarlier{k.Epoch, k.Seq, func() (earlier, error) {
			h, err := w.view.HeadAt(k.Seq)
			if err != nil {
				return earlier{}, err
			}
			lines, err := w.linesOf(h)
			return earlier{k.Note, lines}, err
		}})
	}
	for _, f := range former {
		list = append(list, signedEarlier{f.Epoch, f.Seq, func() (earlier, error) {
			lines, err := w.formerLines(f)
			return earlier{f.Note, lines}, err
		}})
	}
	slices.SortStableFunc(list, func(a, b signedEarlier) int { return cmp.Or(cmp.Compare(a.epoch, b.epoch), cmp.Compare(a.seq, b.seq)) })
	out := []earlier{}
	for _, o := range thinned(list, min(earlierMost, max(2, earlierLinesMost/len(w.doc.Logs)))) {
		one, err := o.prove()
		if err != nil {
			return err
		}
		out = append(out, one)
	}
	return w.json(earlierFile, func() any { return out })
}

// thinned keeps the newest half of what may stay, and of those before evenly as many.
func thinned[T any](list []T, most int) []T {
	if len(list) <= most {
		return list
	}
	spread := most / 2
	older := list[:len(list)-(most-spread)]
	out := make([]T, 0, most)
	for i := range spread {
		out = append(out, older[i*len(older)/spread])
	}
	return append(out, list[len(older):]...)
}

// linesOf proves what a head covers of the logs of the bundle; a log that is younger than the head has no line.
func (w *writer) linesOf(h proof.Head) ([]Line, error) {
	out := []Line{}
	lines, err := h.Lines()
	if err != nil {
		return nil, err
	}
	for _, l := range w.doc.Logs {
		if line, ok := lines[l.Log]; ok {
			out = append(out, lineOf(line))
		}
	}
	return out, nil
}

// formerLines does the same for a head that was signed before a restore, over more than the backup held.
func (w *writer) formerLines(f store.FormerHead) ([]Line, error) {
	var h proof.Head
	for _, l := range f.Logs {
		root, err := proof.ParseHash(l.Root)
		if err != nil {
			return nil, err
		}
		h.Logs = append(h.Logs, proof.LogRoot{Log: l.Log, Size: l.Size, Root: root})
	}
	lines, err := w.linesOf(h)
	for i := range lines {
		at := slices.IndexFunc(f.Logs, func(l store.FormerLog) bool { return l.Log == lines[i].Log })
		if l := f.Logs[at]; l.Kept < l.Size {
			lines[i].Kept = &kept{l.Kept, l.Proof}
		}
	}
	return lines, err
}

// restores writes where a backup took the book's place.
func (w *writer) restores() error {
	list := []store.OfficeRecord{}
	if w.doc.Office != nil {
		var err error
		if list, err = w.view.Restores(w.doc.Office.Size); err != nil {
			return err
		}
	}
	return w.json(restoresFile, func() any { return ofOffice(list) })
}
