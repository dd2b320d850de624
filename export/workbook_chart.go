package export

import (
	"fmt"

	"github.com/xuri/excelize/v2"
)

// chart draws the months of Compliance as columns on a sheet of its own: a drawing of the spreadsheet, which anybody can open,
// change and read the figures of.
func (b *book) chart() error {
	if b.monthsTo < b.monthsFrom || b.monthsFrom <= 0 {
		return nil
	}
	sheet := b.say("sheet.name.compliance")
	line := func(column string) string {
		return fmt.Sprintf("'%s'!$%s$%d:$%s$%d", sheet, column, b.monthsFrom, column, b.monthsTo)
	}
	var series []excelize.ChartSeries
	for _, s := range []struct{ column, key, color string }{{"D", "in_time", green}, {"E", "graced", brass}, {"F", "late", copper}, {"G", "missed", red}, {"H", "no_access", rule}} {
		series = append(series, excelize.ChartSeries{
			Name: b.say("sheet.col." + s.key), Categories: line("A"), Values: line(s.column),
			Fill: excelize.Fill{Type: "pattern", Pattern: 1, Color: []string{s.color}},
		})
	}
	return b.file.AddChartSheet(b.say("sheet.name.chart"), &excelize.Chart{
		Type: excelize.ColStacked, Series: series, Legend: excelize.ChartLegend{Position: "bottom"},
		Title: excelize.ChartTitle{Paragraph: []excelize.RichTextRun{{Text: b.say("sheet.chart_title")}}},
	})
}
