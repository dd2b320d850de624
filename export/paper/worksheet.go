package paper

import (
	"fmt"
	"io"
	"slices"
	"strings"

	"github.com/xuri/excelize/v2"

	"tripwell/forms"
)

// Worksheet writes a round as a workbook to be filled in: one worksheet a task, a row a test in walking order, the
// columns of Lead, of the forms and of Tail. It comes back through the import of readings.
func Worksheet(w io.Writer, r Round) (err error) {
	words, err := catalogue()
	if err != nil {
		return err
	}
	f := excelize.NewFile()
	defer func() {
		if e := f.Close(); e != nil && err == nil {
			err = fmt.Errorf("round: %w", e)
		}
	}()
	b := &sheetBook{File: f, round: r}
	if err := b.makeStyles(); err != nil {
		return fmt.Errorf("round: %w", err)
	}
	first := true
	for _, task := range forms.Tasks() {
		stops := slices.DeleteFunc(slices.Clone(r.Stops), func(s Stop) bool { return s.Task != task })
		if len(stops) == 0 {
			continue
		}
		name := words.Say("task." + task)
		if first {
			err = f.SetSheetName("Sheet1", name)
		} else {
			_, err = f.NewSheet(name)
		}
		if err == nil {
			err = b.fill(name, stops)
		}
		if err != nil {
			return fmt.Errorf("round, %s: %w", name, err)
		}
		first = false
	}
	return f.Write(w)
}

type sheetBook struct {
	*excelize.File
	round                          Round
	heading, text, day, open, shut int // styles
}

func (b *sheetBook) makeStyles() error {
	line := []excelize.Border{{Type: "left", Color: "999999", Style: 1}, {Type: "right", Color: "999999", Style: 1}, {Type: "top", Color: "999999", Style: 1}, {Type: "bottom", Color: "999999", Style: 1}}
	dayFormat := "yyyy-mm-dd"
	for _, s := range []struct {
		id    *int
		style excelize.Style
	}{
		{&b.heading, excelize.Style{Font: &excelize.Font{Bold: true}, Border: line, Alignment: &excelize.Alignment{WrapText: true, Vertical: "bottom"}}},
		{&b.text, excelize.Style{Border: line, Alignment: &excelize.Alignment{WrapText: true, Vertical: "center"}, NumFmt: 49}},
		{&b.day, excelize.Style{Border: line, CustomNumFmt: &dayFormat}},
		{&b.open, excelize.Style{Border: line}},
		{&b.shut, excelize.Style{Border: line, Fill: excelize.Fill{Type: "pattern", Pattern: 1, Color: []string{"D9D9D9"}}}},
	} {
		id, err := b.NewStyle(&s.style)
		if err != nil {
			return err
		}
		*s.id = id
	}
	return nil
}

// columnsOf gives the columns of a worksheet: what any of its tests asks, each once, in the order of the forms.
func columnsOf(stops []Stop, coded bool) (cols []Column, lead int, err error) {
	if cols, err = Lead(); err != nil {
		return nil, 0, err
	}
	lead = len(cols)
	met := map[string]bool{}
	for _, s := range stops {
		for _, c := range s.Columns {
			if !met[c.Header] {
				met[c.Header] = true
				cols = append(cols, c)
			}
		}
	}
	tail, err := Tail()
	if err == nil && coded {
		var round []Column
		round, err = about(AboutRound)
		tail = append(tail, round...)
	}
	return append(cols, tail...), lead, err
}

func (b *sheetBook) fill(name string, stops []Stop) error {
	words, err := catalogue()
	if err != nil {
		return err
	}
	cols, lead, err := columnsOf(stops, b.round.Code != "")
	if err != nil {
		return err
	}
	for i, c := range cols {
		if err := b.column(name, i+1, c, len(stops)); err != nil {
			return err
		}
	}
	for row, s := range stops {
		asked := map[string]bool{}
		for _, c := range s.Columns {
			asked[c.Header] = true
		}
		for i, c := range cols {
			cell, err := excelize.CoordinatesToCellName(i+1, row+2)
			if err != nil {
				return err
			}
			style := b.open
			switch {
			case i < lead && c.About != AboutDay:
				style = b.text
				err = b.SetCellStr(name, cell, clean(s.lead(words, c.About)))
			case c.About == AboutDay:
				style = b.day
			case c.About == AboutRound:
				style = b.text
				err = b.SetCellStr(name, cell, b.round.Code)
			case c.About == "" && !asked[c.Header]:
				style = b.shut
			}
			if err == nil {
				err = b.SetCellStyle(name, cell, cell, style)
			}
			if err != nil {
				return err
			}
		}
	}
	return b.page(name)
}

// column writes a heading and offers the answers below it.
func (b *sheetBook) column(name string, n int, c Column, rows int) error {
	letter, err := excelize.ColumnNumberToName(n)
	if err != nil {
		return err
	}
	if err := b.SetCellStr(name, letter+"1", c.Header); err != nil {
		return err
	}
	if err := b.SetCellStyle(name, letter+"1", letter+"1", b.heading); err != nil {
		return err
	}
	width := 14.0
	switch {
	case c.About == AboutPlace, c.About == AboutNote:
		width = 40
	case len(c.Options) > 2:
		width = 24
	}
	if err := b.SetColWidth(name, letter, letter, width); err != nil {
		return err
	}
	if len(c.answers) == 0 || c.About == AboutTask || c.About == AboutKind {
		return nil
	}
	offer := excelize.NewDataValidation(true)
	offer.Sqref = fmt.Sprintf("%s2:%s%d", letter, letter, rows+1)
	// A list in a formula ends at a comma, and 255 characters is all it holds: without a list, people type the words.
	if slices.ContainsFunc(c.answers, func(a string) bool { return strings.Contains(a, ",") }) || len(strings.Join(c.answers, ",")) > 250 {
		return nil
	}
	if err := offer.SetDropList(c.answers); err != nil {
		return err
	}
	offer.ShowErrorMessage = false // ">310" and a word of one's own must be possible; the import asks about them
	return b.AddDataValidation(name, offer)
}

func (b *sheetBook) page(name string) error {
	words, err := catalogue()
	if err != nil {
		return err
	}
	fit, wide, tall, landscape := true, 1, 0, "landscape"
	if err := b.SetSheetProps(name, &excelize.SheetPropsOptions{FitToPage: &fit}); err != nil {
		return err
	}
	if err := b.SetPageLayout(name, &excelize.PageLayoutOptions{Orientation: &landscape, FitToWidth: &wide, FitToHeight: &tall}); err != nil {
		return err
	}
	if err := b.SetDefinedName(&excelize.DefinedName{Name: "_xlnm.Print_Titles", RefersTo: "'" + name + "'!$1:$1", Scope: name}); err != nil {
		return err
	}
	if err := b.SetPanes(name, &excelize.Panes{Freeze: true, XSplit: 2, YSplit: 1, TopLeftCell: "C2", ActivePane: "bottomRight"}); err != nil {
		return err
	}
	mark := ""
	if b.round.Demo {
		mark = words.Say("sheet.demo_mark") + " "
	}
	// In headers & begins an instruction.
	title := strings.ReplaceAll(mark+clean(b.round.Site.Name)+": "+b.round.title(words), "&", "&&")
	if runes := []rune(title); len(runes) > 120 {
		title = string(runes[:120])
	}
	return b.SetHeaderFooter(name, &excelize.HeaderFooterOptions{OddHeader: "&L" + title, OddFooter: "&R" + words.Say("sheet.footer_page", "page", "&P", "pages", "&N")})
}
