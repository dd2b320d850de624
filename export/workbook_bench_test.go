package export

import (
	"encoding/json"
	"fmt"
	"io"
	"iter"
	"strconv"
	"testing"

	"github.com/xuri/excelize/v2"

	"tripwell/forms"
)

// benchEntries makes entries of five readings each, n readings in all, no two alike.
func benchEntries(base EntryLine, n int) iter.Seq2[EntryLine, error] {
	codes := []string{"trip_current_ma", "test_current_ma", "trip_time_ms", "ground_ohm", "voltage_v"}
	return func(yield func(EntryLine, error) bool) {
		for i := 0; i < n; i += len(codes) {
			e := base
			e.ID = fmt.Sprintf("0192d4a0-%04x-7000-8000-%012x", i>>16, i*7919)
			e.Day += forms.Day(i % 400)
			e.Pos = int64(i)
			e.Body.Readings = make(map[string]forms.Reading, len(codes))
			e.Verdict = forms.Verdict{Result: forms.Pass, Findings: make([]forms.Finding, len(codes))}
			for j, code := range codes {
				v := float64((i+j)%9973) / 16
				e.Body.Readings[code] = forms.Reading{Value: v}
				e.Verdict.Findings[j] = forms.Finding{
					Reading: code, Value: json.RawMessage(strconv.FormatFloat(v, 'f', -1, 64)), Verdict: forms.Pass,
					Limit: &forms.Bounds{Max: number(4988.9)}, Level: "must", Source: "UL 943 Class A, trip time against current",
				}
			}
			if !yield(e, nil) {
				return
			}
		}
	}
}

// benchFloor writes the same rows of Entries and Readings with a bare StreamWriter, default options, no styles; all of them
// as many times over as it is told.
func benchFloor(rows map[string][][]any, times int) error {
	f := excelize.NewFile()
	defer f.Close()
	for name, list := range rows {
		if _, err := f.NewSheet(name); err != nil {
			return err
		}
		sw, err := f.NewStreamWriter(name)
		if err != nil {
			return err
		}
		for i := range times * len(list) {
			if err := sw.SetRow("A"+strconv.Itoa(i+1), list[i%len(list)]); err != nil {
				return err
			}
		}
		if err := sw.Flush(); err != nil {
			return err
		}
	}
	return f.Write(io.Discard)
}

// benchRows are the cells Workbook writes of a source, read back, so that the floor gets the same ones.
func benchRows(b *testing.B, src WorkbookSource) map[string][][]any {
	rows := map[string][][]any{}
	f := opened(b, src)
	for _, sheet := range []string{"Entries", "Readings"} {
		list, err := f.GetRows(sheet, excelize.Options{RawCellValue: true})
		if err != nil {
			b.Fatal(err)
		}
		for _, r := range list {
			row := make([]any, len(r))
			for i, v := range r {
				if n, err := strconv.ParseFloat(v, 64); err == nil {
					row[i] = n
				} else if v != "" {
					row[i] = v
				}
			}
			rows[sheet] = append(rows[sheet], row)
		}
	}
	return rows
}

// BenchmarkWorkbook: readings of 20 columns, five to an entry of 31 columns. The floor is a bare excelize StreamWriter
// with default options and the same cells, made beforehand; for a million it writes those of 100,000 ten times over, which
// differ from ours in the entries' ids alone.
func BenchmarkWorkbook(b *testing.B) {
	base := handSource(b, false)
	var entry EntryLine
	for e := range base.Entries {
		entry = e
		break
	}
	entry.Flags = nil
	source := func(n int) WorkbookSource {
		src := base
		src.Entries = benchEntries(entry, n)
		src.Devices, src.Due = seq[DeviceLine](), seq[DueLine]()
		return src
	}
	const block = 100_000
	for _, times := range []int{1, 10} {
		b.Run(strconv.Itoa(times*block), func(b *testing.B) {
			if times > 1 && testing.Short() {
				b.Skip("a million readings")
			}
			for b.Loop() {
				rows := benchRows(b, source(block))
				floor := timed(func() {
					if err := benchFloor(rows, times); err != nil {
						b.Fatal(err)
					}
				})
				rows = nil // the collector waits longer beside a large heap, and the peak would count that
				peak := watchHeap()
				ours := timed(func() {
					if err := Workbook(io.Discard, source(times*block)); err != nil {
						b.Fatal(err)
					}
				})
				b.ReportMetric(peak(), "peak-MB")
				b.ReportMetric(ours.Seconds()/floor.Seconds(), "x-floor")
			}
		})
	}
}
