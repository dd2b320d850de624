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

// benchFloor writes the same rows of Entries and Readings with a bare StreamWriter, default options, no styles.
func benchFloor(rows map[string][][]any) error {
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
		for i, row := range list {
			if err := sw.SetRow("A"+strconv.Itoa(i+1), row); err != nil {
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
// with default options and the same cells, made beforehand.
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
	b.Run("100000", func(b *testing.B) {
		rows := benchRows(b, source(100_000))
		for b.Loop() {
			floor := timed(func() {
				if err := benchFloor(rows); err != nil {
					b.Fatal(err)
				}
			})
			peak := watchHeap()
			ours := timed(func() {
				if err := Workbook(io.Discard, source(100_000)); err != nil {
					b.Fatal(err)
				}
			})
			b.ReportMetric(peak(), "peak-MB")
			b.ReportMetric(ours.Seconds()/floor.Seconds(), "x-floor")
		}
	})
	b.Run("1000000-peak", func(b *testing.B) {
		if testing.Short() {
			b.Skip("a million readings")
		}
		for b.Loop() {
			peak := watchHeap()
			if err := Workbook(io.Discard, source(1_000_000)); err != nil {
				b.Fatal(err)
			}
			b.ReportMetric(peak(), "peak-MB")
		}
	})
}
