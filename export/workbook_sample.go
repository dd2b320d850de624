package export

import (
	"tripwell/forms"
	"tripwell/store"
)

// SampleLine says how large a fair sample of a site's devices is; Site is zero for all sites together.
type SampleLine struct {
	Site    store.Site
	Devices int
}

// sampleShares are the shares of wrong devices for which sample sizes are given, at sampleConfidence.
var sampleShares = []float64{0.01, 0.02, 0.05, 0.10}

const sampleConfidence = 0.95

var sampleColumns = []column{
	{"site_code", 12, textCell}, {"site", 26, textCell}, {"devices", 10, countCell}, {"sample_1", 14, countCell}, {"sample_2", 14, countCell}, {"sample_5", 14, countCell}, {"sample_10", 14, countCell},
}

// sample says how many devices to see for a share that must not be missed. Which ones is drawn with the bundle and a word of the
// auditor's, and so stands in no workbook.
func (b *book) sample() error {
	s, err := b.sheet("sample", sampleColumns)
	if err != nil {
		return err
	}
	for _, l := range b.src.Samples {
		code, name := l.Site.Code, l.Site.Name
		if l.Site.ID == "" {
			code, name = "", b.say("sheet.all_sites")
		}
		s.row().text(code).text(name).count(int64(l.Devices))
		for _, share := range sampleShares {
			s.count(int64(forms.SampleSize(l.Devices, forms.SampleBad(l.Devices, share), sampleConfidence)))
		}
		if err := s.end(); err != nil {
			return err
		}
	}
	return s.close()
}
