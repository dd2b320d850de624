// Package paper makes what a crew carries on paper and what it files: round sheets and device sheets as PDF, and the
// round sheet's worksheet, which comes back through the import of readings under the headings of Columns.
//
// It writes to an io.Writer from values read within a store.View; it opens no files and knows no HTTP.
package paper

import (
	"cmp"
	"fmt"
	"slices"
	"strconv"
	"strings"
	"sync"

	"tripwell/forms"
	"tripwell/static"
)

// What a column that is no reading says; Column.About.
const (
	AboutTag        = "tag"
	AboutPlace      = "place"
	AboutKind       = "kind"
	AboutCircuit    = "circuit"
	AboutTask       = "task"
	AboutDay        = "day"
	AboutReadBy     = "read_by"
	AboutInstrument = "instrument"
	AboutNotTested  = "not_tested" // why nothing could be tested: Options are the missing reasons
	AboutNote       = "note"
	AboutRound      = "round" // the code of the round the row belongs to (store.RoundCode)
)

// Column is one column of a round's worksheet: either a reading (under its condition, where it belongs to a series), the
// one-tap answer of a form, or something about the test itself.
type Column struct {
	Header  string            // what stands above it
	About   string            // one of the About constants, "" for readings and the quick answer
	Reading string            // reading code
	Unit    string            // unit of the figures, as forms.Code states it; "" for answers
	At      map[string]any    // condition of a series reading, as entries carry it; nil outside a series
	Options map[string]string // answers in words, lower case, and what they mean; nil for figures and free text
	Quick   map[string]string // the readings a "yes" in this column states; nil for all other columns

	answers []string // Options as people read them, in the order of the form
	when    []forms.Condition
}

// Answers lists what may be written in the column, in words, in the order of the form; empty for figures and free text.
func (c Column) Answers() []string { return c.answers }

// Columns gives the columns of a form's readings, in the order they are asked. Beside them a worksheet has Lead before
// and Tail after.
func Columns(form *forms.Form) ([]Column, error) {
	words, err := catalogue()
	if err != nil {
		return nil, err
	}
	var cols []Column
	if form.Quick != nil {
		c := Column{Header: words.Say("paper.quick"), Quick: form.Quick.Readings}
		c.answer("yes", words.Say("option.yes"))
		cols = append(cols, c)
	}
	// A question put a second time stands where it is put last: RESET after TEST, not where a dead device is first tried.
	times := map[string]int{}
	for _, step := range form.Steps {
		for _, ask := range step.Asks {
			times[ask.Reading]++
		}
	}
	for _, step := range form.Steps {
		for _, ask := range step.Asks {
			if times[ask.Reading]--; times[ask.Reading] > 0 {
				continue
			}
			if !ask.Series || form.Series == nil {
				cols = append(cols, readingColumn(words, &ask, nil, nil))
				continue
			}
			for _, cond := range form.Series.Conditions {
				c := readingColumn(words, &ask, cond.At, cond.When)
				same := func(o Column) bool { return o.Header == c.Header }
				if slices.Contains(cond.AnyOf, ask.Reading) && !slices.ContainsFunc(cols, same) {
					cols = append(cols, c)
				}
			}
		}
	}
	return cols, nil
}

// Lead gives the columns before the readings; the tag is the first of them.
func Lead() ([]Column, error) {
	return about(AboutTag, AboutPlace, AboutKind, AboutCircuit, AboutTask, AboutDay)
}

// Tail gives the columns after the readings.
func Tail() ([]Column, error) { return about(AboutNotTested, AboutReadBy, AboutInstrument, AboutNote) }

func about(keys ...string) ([]Column, error) {
	words, err := catalogue()
	if err != nil {
		return nil, err
	}
	cols := make([]Column, len(keys))
	for i, key := range keys {
		c := Column{Header: words.Say("paper.col." + key), About: key}
		switch key {
		case AboutNotTested:
			for _, reason := range forms.MissingReasons() {
				c.answer(reason, words.Say("missing."+reason))
			}
		case AboutTask:
			for _, task := range forms.Tasks() {
				c.answer(task, words.Say("task."+task))
			}
		case AboutKind:
			for _, kind := range forms.Kinds() {
				c.answer(kind, words.Say("kind."+kind))
			}
		}
		cols[i] = c
	}
	return cols, nil
}

// Headings gives every column a worksheet can have, by its header in lower case: of all shipped forms, Lead and Tail.
// A header means one thing, whichever form it stands for; only a one-tap answer depends on the form (Columns).
func Headings() (map[string]Column, error) {
	all := map[string]Column{}
	ofRound := func() ([]Column, error) { return about(AboutRound) }
	for _, get := range []func() ([]Column, error){Lead, Tail, ofRound} {
		cols, err := get()
		if err != nil {
			return nil, err
		}
		for _, c := range cols {
			all[strings.ToLower(c.Header)] = c
		}
	}
	for _, form := range forms.Shipped().Forms {
		cols, err := Columns(form)
		if err != nil {
			return nil, err
		}
		for _, c := range cols {
			all[strings.ToLower(c.Header)] = c
		}
	}
	return all, nil
}

var catalogue = sync.OnceValues(func() (*static.Words, error) { return static.ReadWords("en") })

func (c *Column) answer(value, word string) {
	if c.Options == nil {
		c.Options = map[string]string{}
	}
	c.Options[strings.ToLower(word)] = value
	c.answers = append(c.answers, word)
}

func readingColumn(words *static.Words, ask *forms.Ask, at map[string]any, when []forms.Condition) Column {
	code := ask.Reading
	known, _ := forms.CodeOf(code)
	c := Column{Reading: code, Unit: known.Unit, At: at, when: when}
	c.Header = cmp.Or(ask.Name, words.Say("reading."+code+".name"))
	if at != nil {
		c.Header = words.Say("paper.at", "name", c.Header, "at", conditionText(words, at))
	}
	if known.Unit != "" {
		c.Header = words.Say("paper.unit", "name", c.Header, "unit", words.Say("unit."+known.Unit))
	}
	options := known.Options
	if len(options) == 0 {
		options = ask.Options // of a choice an organisation added
	}
	for _, value := range options {
		word := "option." + code + "." + value
		if !words.Has(word) {
			word = "option." + value
		}
		if !words.Has(word) {
			c.answer(value, value)
			continue
		}
		c.answer(value, words.Say(word))
	}
	if known.Type == forms.TypeYesNo { // a plain yes or no is enough on paper
		c.answers = nil
		for _, value := range known.Options {
			c.answer(value, words.Say("option."+value))
		}
	}
	return c
}

// conditionText says the condition of a series reading: "5 × rated 180°", "Upper".
func conditionText(words *static.Words, at map[string]any) string {
	var parts []string
	for _, key := range []string{"multiple", "phase_deg", "waveform", "face"} {
		v, ok := at[key]
		if !ok {
			continue
		}
		text := fmt.Sprint(v)
		if f, ok := v.(float64); ok {
			text = strconv.FormatFloat(f, 'f', -1, 64)
		}
		switch key {
		case "multiple":
			text = words.Say("paper.at_multiple", "multiple", text)
		case "phase_deg":
			text = words.Say("paper.at_phase", "phase", text)
		default:
			text = words.Say("option." + key + "." + text)
		}
		parts = append(parts, text)
	}
	return strings.Join(parts, " ")
}
