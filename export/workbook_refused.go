package export

import (
	"time"

	"tripwell/store"
)

// RefusalLine is a record in quarantine; SiteCode is "" for the organisation's logs.
type RefusalLine struct {
	SiteCode string
	store.Refusal
}

var refusedColumns = []column{
	{"site_code", 10, textCell}, {"received", 20, timeCell}, {"why", 16, textCell}, {"meaning", 60, textCell}, {"from", 38, textCell}, {"n", 8, countCell}, {"record_id", 38, textCell}, {"sha256", 66, textCell},
}

// refused lists what could not be taken; the bytes are kept and can be asked for.
func (b *book) refused() error {
	s, err := b.sheet("refused", refusedColumns)
	if err != nil {
		return err
	}
	for _, r := range b.src.Refusals {
		err := s.row().text(r.SiteCode).time(r.Received, time.UTC).text(r.Code).text(r.Text).text(r.From).count(r.N).text(r.Record).text(r.SHA256).end()
		if err != nil {
			return err
		}
	}
	return s.close()
}
