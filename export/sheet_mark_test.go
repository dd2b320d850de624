package export

import (
	"strings"
	"testing"
)

// Every colour stands beside a word: what a mark looks for is a text some cell of its column can hold, and it is in the file.
func TestWorkbook_MarksColourWhatTheCellSays(t *testing.T) {
	f := opened(t, handSource(t, true))
	for sheet, wants := range map[string][]string{
		"Due": {`"Overdue"`, `"Due"`}, "Defects": {`"Not safe"`, "$H3<"}, "Instruments": {`"certificate ended"`}, "Compliance": {"$G3>0"}, "Corrections": {`"no"`},
	} {
		all, err := f.GetConditionalFormats(sheet)
		if err != nil {
			t.Fatal(err)
		}
		said := ""
		for at, options := range all {
			for _, o := range options {
				said += at + " " + o.Value + o.Criteria + "\n"
				if o.Format == nil {
					t.Errorf("%s %s: no format", sheet, at)
				}
			}
		}
		for _, want := range wants {
			if !strings.Contains(strings.ToLower(said), strings.ToLower(want)) {
				t.Errorf("sheet %s: no mark for %s, got\n%s", sheet, want, said)
			}
		}
	}
}
