package export

import (
	"fmt"
	"strconv"
	"strings"

	"github.com/xuri/excelize/v2"

	"tripwell/forms"
)

// mark colours a cell by what it says. The word is in the cell already: in black and white, and after somebody edits the colours
// away, the sheet says the same.
type mark struct {
	column string // key
	word   string // "" = by formula
	// formula holds for a row; {key} stands for the address of that column's cell in it.
	formula string
	color   string
	bold    bool
}

// oldDefectDays is the age from which an open defect is coloured.
const oldDefectDays = 30

// marks are those of a sheet, by its key.
func (b *book) marks(key string) []mark {
	switch key {
	case "due":
		return []mark{{column: "state", word: b.word("state", "overdue"), color: red, bold: true}, {column: "state", word: b.word("state", "due"), color: brass}}
	case "defects":
		today := int(forms.DayOf(b.src.AsOf.UTC())) + serialDay
		return []mark{
			{column: "severity", word: b.say("office.defect.severity.unsafe"), color: red, bold: true},
			{column: "opened", formula: fmt.Sprintf(`AND({closed}="",{opened}<>"",{opened}<%d)`, today-oldDefectDays), color: brass, bold: true},
			{column: "fix_due", formula: fmt.Sprintf(`AND({closed}="",{fix_due}<>"",{fix_due}<%d)`, today), color: red, bold: true},
		}
	case "instruments":
		return []mark{{column: "status", word: b.say("sheet.certificate_ended"), color: red, bold: true}}
	case "compliance":
		return []mark{{column: "missed", formula: `AND(ISNUMBER({missed}),{missed}>0)`, color: red, bold: true}, {column: "late", formula: `AND(ISNUMBER({late}),{late}>0)`, color: brass}}
	case "corrections":
		return []mark{{column: "counts", word: b.say("sheet.no"), color: brass, bold: true}}
	}
	return nil
}

// setMarks puts the marks of a sheet on all the rows it may have.
func (s *sheet) setMarks() error {
	for _, m := range s.book.marks(s.key) {
		style, err := s.book.file.NewConditionalStyle(&excelize.Style{Font: &excelize.Font{Color: m.color, Bold: m.bold}})
		if err != nil {
			return fmt.Errorf("sheet %s: %w", s.name, err)
		}
		option := excelize.ConditionalFormatOptions{Type: "cell", Criteria: "==", Value: strconv.Quote(m.word), Format: &style}
		if m.word == "" {
			option = excelize.ConditionalFormatOptions{Type: "formula", Criteria: s.rowFormula(m.formula), Format: &style}
		}
		column := s.letter(m.column)
		at := fmt.Sprintf("%s%d:%s%d", column, s.head+1, column, sheetRows)
		if err := s.book.file.SetConditionalFormat(s.name, at, []excelize.ConditionalFormatOptions{option}); err != nil {
			return fmt.Errorf("sheet %s: %w", s.name, err)
		}
	}
	return nil
}

// letter is the column of a key.
func (s *sheet) letter(key string) string {
	for i, c := range s.cols {
		if c.key == key {
			return s.letters[i]
		}
	}
	return ""
}

// rowFormula puts the addresses of the first row's cells in; a spreadsheet moves them along for each row.
func (s *sheet) rowFormula(formula string) string {
	for i, c := range s.cols {
		formula = strings.ReplaceAll(formula, "{"+c.key+"}", "$"+s.letters[i]+strconv.Itoa(s.head+1))
	}
	return formula
}
