package results

import (
	"slices"
	"testing"

	"tripwell/export/paper"
	"tripwell/forms"
)

// A check an organisation added stands on the round's sheet under its own name, and comes back from there.
func TestOwnColumns_ComeBackUnderTheirName(t *testing.T) {
	withOwn := func(id string, asks ...forms.Ask) *forms.Form {
		form := *forms.Shipped().Forms[0]
		form.ID, form.Steps = id, slices.Clone(form.Steps)
		last := &form.Steps[len(form.Steps)-1]
		last.Asks = append(slices.Clone(last.Asks), asks...)
		return &form
	}
	colour := forms.Ask{Reading: "own_choice_1", Name: "Colour of the wall", Type: forms.TypeChoice, Options: []string{"White", "grey"}}
	ru := &rules{forms: map[string]*forms.Form{
		"a": withOwn("a", colour, forms.Ask{Reading: "own_yes_no_1", Name: "Cover whole?", Type: forms.TypeYesNo}),
		"b": withOwn("b", forms.Ask{Reading: "own_yes_no_2", Name: "Cover whole?", Type: forms.TypeYesNo}),
	}}
	own, err := ru.ownColumns()
	if err != nil {
		t.Fatal(err)
	}
	if _, ok := own["cover whole?"]; ok {
		t.Error("a heading of two checks was taken for one of them")
	}
	col, ok := own["colour of the wall"]
	if !ok || col.reading != "own_choice_1" {
		t.Fatalf("got %+v", own)
	}
	cols, err := paper.Columns(ru.forms["a"])
	if err != nil {
		t.Fatal(err)
	}
	if !slices.ContainsFunc(cols, func(c paper.Column) bool {
		return c.Header == colour.Name && slices.Equal(c.Answers(), colour.Options)
	}) {
		t.Error("the round's sheet lacks the check, or what may be answered")
	}
	known, _ := forms.CodeOf("own_choice_1")
	if r, said, why := col.answer(known, "white"); why != nil || !said || r.Value != "White" {
		t.Errorf("white: got %+v %v %+v", r, said, why)
	}
	if _, _, why := col.answer(known, "green"); why == nil {
		t.Error("green was taken for an answer")
	}
}
