package forms

import (
	"bytes"
	"fmt"
	"slices"
	"testing"
	"time"

	"github.com/go-json-experiment/json"
)

// benchLines gives JSON lines that hold at least n readings: instrument tests of ground-fault devices, some outside
// their limits, and RCD tests with their series.
func benchLines(n int) (lines [][]byte, readings int) {
	for i := 0; readings < n; i++ {
		current := 6.2 + float64(i%40)/10
		if i%4 == 3 {
			lines = append(lines, fmt.Appendf(nil, `{"form":"rcd/instrument","rated_residual_ma":30,"readings":{"condition":"sound","found":"on","voltage_v":%d,"ground_continuous":"yes","electrode_ohm":%d,"button_trips":"yes","button_resets":"yes","trip_current_ma":%d},"series":[{"at":{"multiple":0.5,"phase_deg":0},"trip_time_ms":"no-trip"},{"at":{"multiple":0.5,"phase_deg":180},"trip_time_ms":{"above":2000,"unit":"ms"}},{"at":{"multiple":1,"phase_deg":0},"trip_time_ms":%d},{"at":{"multiple":1,"phase_deg":180},"trip_time_ms":%d},{"at":{"multiple":5,"phase_deg":0},"trip_time_ms":%d},{"at":{"multiple":5,"phase_deg":180},"trip_time_ms":%d}]}`,
				225+i%12, 20+i%230, 12+i%20, 18+i%290, 20+i%295, 8+i%33, 9+i%33))
			readings += 14
			continue
		}
		lines = append(lines, fmt.Appendf(nil, `{"form":"gfci-receptacle/instrument","given":{"kind":"gfci-receptacle","nominal_v":120,"ramp":{"ma_per_s":0.5}},"readings":{"condition":"sound","found":"on","indicator":"normal","voltage_v":{"typed":"%.1f","unit":"V","value":%.1f},"wiring":"correct","ground_continuous":"yes","ground_ohm":{"typed":"0,%02d","unit":"ohm","value":0.%02d},"button_trips":"yes","load_dead_when_tripped":"yes","button_resets":"yes","test_current_ma":%.1f,"trip_time_ms":{"typed":"%d","unit":"ms","value":%d},"trip_current_ma":%.1f,"restored":"yes"}}`,
			116+float64(i%90)/10, 116+float64(i%90)/10, 10+i%80, 10+i%80, current, 40+(i*37)%6000, 40+(i*37)%6000, 3.8+float64(i%30)/10))
		readings += 14
	}
	return lines, readings
}

// BenchmarkVerdict judges 100,000 readings from JSON lines, as the command verdict does: decode, check, judge, write.
// The floor decodes the same lines into the same type with the same JSON library and encodes that value again. Both run
// in slices of the same lines, one after the other, so that a busy machine slows both. x-floor is time over time.
func BenchmarkVerdict(b *testing.B) {
	lines, readings := benchLines(100_000)
	shipped := Shipped()
	var ours, floor time.Duration
	var out []byte
	var sink bytes.Buffer
	for b.Loop() {
		for chunk := range slices.Chunk(lines, 500) {
			start := time.Now()
			for _, raw := range chunk {
				var line Line
				if err := DecodeLine(raw, &line); err != nil {
					b.Fatal(err)
				}
				v, err := shipped.JudgeLine(&line)
				if err != nil {
					b.Fatal(err)
				}
				out = v.AppendJSON(out[:0])
			}
			ours += time.Since(start)
			start = time.Now()
			for _, raw := range chunk {
				var line Line
				if err := json.Unmarshal(raw, &line, json.RejectUnknownMembers(true)); err != nil {
					b.Fatal(err)
				}
				sink.Reset()
				if err := json.MarshalWrite(&sink, &line); err != nil {
					b.Fatal(err)
				}
			}
			floor += time.Since(start)
		}
	}
	b.ReportMetric(float64(ours)/float64(floor), "x-floor")
	b.ReportMetric(float64(readings)*float64(b.N)/ours.Seconds(), "readings/s")
}
