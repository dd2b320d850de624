package forms

import "testing"

func TestDecodeLine_RefusalsNameTheField(t *testing.T) {
	for _, c := range []struct{ raw, field, text string }{
		{`{"form":"rcd/button","form":"rcd/button"}`, "form", `The name "form" stands twice in one object. Keep one.`},
		{`{"form":"x","readings":{"found":"on","found":"on"}}`, "readings.found", `The name "found" stands twice in one object. Keep one.`},
		{`{"form":"x","readings":{"trip_time_ms":{"above":1,"above":2}}}`, "readings.trip_time_ms.above", `The name "above" stands twice in one object. Keep one.`},
		{`{"form":"x","series":[{"at":{"multiple":1,"multiple":1}}]}`, "series.0.at.multiple", `The name "multiple" stands twice in one object. Keep one.`},
		{`{"form":"x","given":{"rated":30}}`, "given.rated", `"rated" is no name known here. Leave it out, or correct its spelling.`},
		{`{"form":"x","reading":{}}`, "reading", `"reading" is no name known here. Leave it out, or correct its spelling.`},
		{`{"form":7}`, "form", "form must be text."},
		{`{"form":"x","given":{"faces":"two"}}`, "given.faces", "faces must be a whole number."},
		{`{"form":"x","given":{"delayed":"yes"}}`, "given.delayed", "delayed must be true or false."},
		{`{"form":"x","given":{"calibration_due":"2026-13-01"}}`, "given.calibration_due", "calibration_due must be a date, written 2026-12-31."},
		{`{"form":"x","rated_residual_ma":"30"}`, "rated_residual_ma", "rated_residual_ma must be a number."},
		{`{"form":"x","series":{}}`, "series", "series must be a list."},
		{`{"form":"x","series":[7]}`, "series.0", textSeriesShape},
		{`{"form":"x","series":[{"at":7}]}`, "series.0.at", textAtShape},
		{`{"form":"x","series":[{"at":{"multiple":[1]}}]}`, "series.0.at", textAtShape},
		{`{"form":"x","series":[{"at":{"multiple":1},"trip_time_ms":[]}]}`, "series.0.trip_time_ms", textReadingShape},
		{`{"form":"x","readings":{"trip_time_ms":[1]}}`, "readings.trip_time_ms", textReadingShape},
		{`{"form":"x","readings":{"trip_time_ms":null}}`, "readings.trip_time_ms", textReadingShape},
		{`{"form":"x","readings":{"trip_time_ms":{}}}`, "readings.trip_time_ms", textReadingShape},
		{`{"form":"x","readings":{"trip_time_ms":{"value":1,"above":2}}}`, "readings.trip_time_ms", textReadingShape},
		{`{"form":"x","readings":{"trip_time_ms":{"value":1,"ms":2}}}`, "readings.trip_time_ms", textReadingKey},
		{`{"form":"x","readings":{"trip_time_ms":1e300}}`, "readings.trip_time_ms", textNumberRange},
		{`{"form":"x","readings":{"trip_time_ms":1e999}}`, "readings.trip_time_ms", textNumberRange},
		{`[]`, "", "A line is one JSON object."},
		{`{"form":"x"`, "", "This line is not one JSON object: it goes wrong at byte 11. Check quotes, commas and brackets there."},
		{`{"form":"x"} {}`, "", "This line is not one JSON object: it goes wrong at byte 13. Check quotes, commas and brackets there."},
	} {
		var line Line
		err := DecodeLine([]byte(c.raw), &line)
		e, ok := asError(err)
		if !ok || e.Code != "invalid" || e.Field != c.field || e.Text != c.text {
			t.Errorf("%s:\n got %+v\nwant field %q, %q", c.raw, err, c.field, c.text)
			if ok {
				t.Logf("field %q", e.Field)
			}
		}
	}
}
