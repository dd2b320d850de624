package paper

import (
	"strings"
	"testing"

	"tripwell/forms"
)

func TestColumns_EveryAskHasOneAndEveryHeaderMeansOneThing(t *testing.T) {
	headings, err := Headings()
	if err != nil {
		t.Fatal(err)
	}
	for _, form := range forms.Shipped().Forms {
		cols, err := Columns(form)
		if err != nil {
			t.Fatal(err)
		}
		asked := map[string]bool{}
		for _, c := range cols {
			asked[c.Reading] = true
			known := headings[strings.ToLower(c.Header)]
			if known.Reading != c.Reading || conditionKey(known.At) != conditionKey(c.At) || known.About != "" {
				t.Errorf("%s: %q means %s %v here and %s %v elsewhere", form.ID, c.Header, c.Reading, c.At, known.Reading, known.At)
			}
			if strings.Contains(c.Header, "reading.") || strings.Contains(c.Header, "option.") {
				t.Errorf("%s: header %q has no words", form.ID, c.Header)
			}
			if code, _ := forms.CodeOf(c.Reading); code.Unit != c.Unit || len(code.Options) != len(c.Answers()) || len(c.Options) < len(c.Answers()) {
				if c.Quick == nil {
					t.Errorf("%s: %q has unit %q and %d answers, the code has %q and %d", form.ID, c.Header, c.Unit, len(c.Options), code.Unit, len(code.Options))
				}
			}
		}
		for _, step := range form.Steps {
			for _, ask := range step.Asks {
				if (ask.Required || !ask.Series) && !asked[ask.Reading] {
					t.Errorf("%s: %s is asked and has no column", form.ID, ask.Reading)
				}
			}
		}
	}
}

func conditionKey(at map[string]any) string {
	words, err := catalogue()
	if err != nil {
		return err.Error()
	}
	return conditionText(words, at)
}
