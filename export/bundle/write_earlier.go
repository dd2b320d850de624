package bundle

import (
	"cmp"
	"slices"

	"tripwell/store"
	"tripwell/store/proof"
)

// earlierMost bounds the earlier heads of a bundle; the newest stand.
const earlierMost = 2000

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
	type ordered struct {
		epoch int
		seq   uint64
		earlier
	}
	var list []ordered
	for _, k := range signed[max(0, len(signed)-earlierMost):] {
		h, err := w.view.HeadAt(k.Seq)
		if err != nil {
			return err
		}
		lines, err := w.linesOf(h)
		if err != nil {
			return err
		}
		list = append(list, ordered{k.Epoch, k.Seq, earlier{k.Note, lines}})
	}
	for _, f := range former[max(0, len(former)-earlierMost):] {
		lines, err := w.formerLines(f)
		if err != nil {
			return err
		}
		list = append(list, ordered{f.Epoch, f.Seq, earlier{f.Note, lines}})
	}
	slices.SortStableFunc(list, func(a, b ordered) int { return cmp.Or(cmp.Compare(a.epoch, b.epoch), cmp.Compare(a.seq, b.seq)) })
	out := []earlier{}
	for _, o := range list[max(0, len(list)-earlierMost):] {
		out = append(out, o.earlier)
	}
	return w.json(earlierFile, func() any { return out })
}

// linesOf proves what a head covers of the logs of the bundle; a log that is younger than the head has no line.
func (w *writer) linesOf(h proof.Head) ([]Line, error) {
	out := []Line{}
	for _, l := range w.doc.Logs {
		if !slices.ContainsFunc(h.Logs, func(r proof.LogRoot) bool { return r.Log == l.Log }) {
			continue
		}
		line, err := h.Line(l.Log)
		if err != nil {
			return nil, err
		}
		out = append(out, lineOf(line))
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
