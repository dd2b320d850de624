package export

import (
	"fmt"

	"github.com/xuri/excelize/v2"

	"tripwell/forms"
)

// sheetStyles are the ids of the styles in the workbook, made once.
type sheetStyles struct {
	of                                          map[cellKind]int
	heading, demo, title, label, wrapped, fixed int
	verdicts                                    map[string]int
}

// The colours of the logbook: ink, rule, and the three of the trade's terminals, dark enough to read on white.
const (
	ink    = "1F2328"
	rule   = "8A8F98"
	paper  = "F3EFE6"
	green  = "1E6B3A"
	brass  = "7A5200"
	red    = "A3201A"
	copper = "8C4A1F"
)

func makeStyles(f *excelize.File) (sheetStyles, error) {
	st := sheetStyles{of: map[cellKind]int{}, verdicts: map[string]int{}}
	var err error
	add := func(s *excelize.Style) int {
		id, e := f.NewStyle(s)
		if e != nil && err == nil {
			err = fmt.Errorf("workbook styles: %w", e)
		}
		return id
	}
	form := func(s string) *string { return &s }
	top := &excelize.Alignment{Vertical: "top"}
	wrap := &excelize.Alignment{Vertical: "top", WrapText: true}
	// 49 is the text format "@": a cell that is edited again stays text, whatever it begins with.
	st.of[textCell] = add(&excelize.Style{NumFmt: 49, Alignment: top})
	st.of[dayCell] = add(&excelize.Style{CustomNumFmt: form("yyyy-mm-dd"), Alignment: &excelize.Alignment{Vertical: "top", Horizontal: "left"}})
	st.of[timeCell] = add(&excelize.Style{CustomNumFmt: form("yyyy-mm-dd hh:mm:ss"), Alignment: &excelize.Alignment{Vertical: "top", Horizontal: "left"}})
	st.of[numberCell] = add(&excelize.Style{CustomNumFmt: form("General;-General;0;@"), Alignment: &excelize.Alignment{Vertical: "top", Horizontal: "right"}})
	st.of[countCell] = add(&excelize.Style{NumFmt: 1, Alignment: top})
	st.of[verdictCell] = st.of[textCell]
	st.heading = add(&excelize.Style{
		NumFmt: 49, Font: &excelize.Font{Bold: true, Color: ink}, Fill: excelize.Fill{Type: "pattern", Pattern: 1, Color: []string{paper}},
		Border: []excelize.Border{{Type: "bottom", Style: 2, Color: copper}}, Alignment: &excelize.Alignment{Vertical: "bottom", WrapText: true},
	})
	st.demo = add(&excelize.Style{NumFmt: 49, Font: &excelize.Font{Bold: true, Color: red, Size: 12}})
	st.title = add(&excelize.Style{NumFmt: 49, Font: &excelize.Font{Bold: true, Size: 18, Family: "Georgia", Color: ink}})
	st.label = add(&excelize.Style{NumFmt: 49, Font: &excelize.Font{Bold: true, Color: ink}, Alignment: wrap})
	st.wrapped = add(&excelize.Style{NumFmt: 49, Alignment: wrap})
	st.fixed = add(&excelize.Style{NumFmt: 49, Font: &excelize.Font{Family: "Consolas", Size: 9}, Alignment: wrap})
	looks := map[string][2]string{
		forms.Pass: {"●", green}, forms.Watch: {"▲", brass}, forms.ConditionalPass: {"▲", brass}, forms.ConditionalFail: {"▲", red},
		forms.Incomplete: {"▲", brass}, forms.Fail: {"◆", red}, forms.Missing: {"◌", rule}, forms.NotJudged: {"◌", rule}, forms.NotTested: {"◌", rule},
	}
	for _, code := range sortedKeys(looks) {
		look := looks[code]
		// The shape is part of the number format, so the cell's value stays the bare word.
		st.verdicts[code] = add(&excelize.Style{
			CustomNumFmt: form(fmt.Sprintf("General;General;General;%q@", look[0]+" ")),
			Font:         &excelize.Font{Bold: code == forms.Fail, Color: look[1]}, Alignment: top,
		})
	}
	return st, err
}

func (st sheetStyles) verdict(code string) int {
	if id, ok := st.verdicts[code]; ok {
		return id
	}
	return st.of[textCell]
}
