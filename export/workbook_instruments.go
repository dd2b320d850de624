package export

import (
	"strings"
	"tripwell/forms"
)

var instrumentColumns = []column{
	{"instrument_name", 24, textCell}, {"serial", 16, textCell}, {"accuracy", 60, textCell}, {"ramp", 26, textCell}, {"calibration_due", 14, dayCell}, {"status", 14, textCell},
	{"instrument_id", 38, textCell},
}

func (b *book) instruments() error {
	s, err := b.sheet("instruments", instrumentColumns)
	if err != nil {
		return err
	}
	for _, i := range b.src.Instruments {
		var accuracy []string
		for _, code := range sortedKeys(i.Accuracy) {
			a := i.Accuracy[code]
			accuracy = append(accuracy, b.say("sheet.accuracy", "reading", b.readingName(code), "percent", figureText(a.Percent), "plus", figureText(a.Plus), "unit", b.unit(code)))
		}
		ramp := ""
		switch {
		case i.Ramp == nil:
		case i.Ramp.StepMA > 0 && i.Ramp.DwellMS > 0:
			ramp = b.say("sheet.ramp", "step", figureText(i.Ramp.StepMA), "dwell", figureText(i.Ramp.DwellMS))
		default:
			ramp = b.say("sheet.ramp_rate", "rate", figureText(i.Ramp.RateMAPerS))
		}
		status := "in_service"
		switch {
		case i.Retired:
			status = "retired"
		case i.CalibrationDue != forms.NoDay && i.CalibrationDue < forms.DayOf(b.src.AsOf.UTC()):
			status = "certificate_ended"
		}
		err := s.row().text(i.Name).text(i.Serial).text(strings.Join(accuracy, "; ")).text(ramp).day(i.CalibrationDue).text(b.say("sheet." + status)).text(i.ID).end()
		if err != nil {
			return err
		}
	}
	return s.close()
}
