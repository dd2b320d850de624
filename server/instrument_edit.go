package server

import (
	"strconv"

	"github.com/labstack/echo/v4"

	"tripwell/forms"
	"tripwell/store"
)

// accuracyCodes are the readings whose accuracy an instrument's form asks for.
var accuracyCodes = []string{"trip_time_ms", "trip_current_ma", "test_current_ma", "ground_ohm"}

func (s *Server) instrumentNew(c echo.Context) error {
	f, err := s.blankForm(nil)
	if err != nil {
		return err
	}
	return s.formBack(c, f, s.instrumentForm(c, nil))
}

func (s *Server) instrumentCreate(c echo.Context) error {
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	return s.instrumentSave(c, f, nil)
}

func (s *Server) instrumentEdit(c echo.Context) error {
	i, err := s.instrumentOf(c)
	if err != nil {
		return err
	}
	f, err := s.editForm(instrumentValues(i), nil)
	if err != nil {
		return err
	}
	return s.formBack(c, f, s.instrumentForm(c, &i))
}

func (s *Server) instrumentUpdate(c echo.Context) error {
	i, err := s.instrumentOf(c)
	if err != nil {
		return err
	}
	f, err := s.typedForm(c)
	if err != nil {
		return err
	}
	f.meanwhile(instrumentValues(i))
	return s.instrumentSave(c, f, &i)
}

func (s *Server) instrumentSave(c echo.Context, f *typedForm, i *store.Instrument) error {
	record, subject := f.id(recordField), f.id(subjectField)
	if i != nil {
		subject = i.ID
	}
	set := s.instrumentSet(f)
	if f.ok() {
		var err error
		if len(set) > 0 {
			err = s.append(c, store.Draft{ID: record, Kind: "instrument.set", Log: "org", Subject: subject, Body: f.setBody(set)})
		}
		if err == nil {
			return toPage(c, "/set-up")
		}
		if err := f.takeRefusal(err); err != nil {
			return err
		}
	}
	return s.formBack(c, f, s.instrumentForm(c, i))
}

// instrumentSet reads what an instrument's form may change. Accuracy and ramp are one field each in the register.
func (s *Server) instrumentSet(f *typedForm) map[string]any {
	k, set := s.ink(), map[string]any{}
	f.setText(set, "name", "name", f.needed("name", k.say("office.instrument.name"), 80))
	f.setText(set, "serial", "serial", f.line("serial", 80))
	f.setText(set, "calibration_due", "calibration_due", f.date("calibration_due").String())
	accuracy, touched := map[string]any{}, false
	for _, code := range accuracyCodes {
		percent, plus := f.figure("percent."+code), f.figure("plus."+code)
		touched = touched || f.changed("percent."+code) || f.changed("plus."+code)
		one := map[string]any{}
		if percent != nil {
			one["percent"] = *percent
		}
		if plus != nil {
			one["plus"] = *plus
		}
		if len(one) > 0 {
			accuracy[code] = one
		}
	}
	if touched {
		if set["accuracy"] = accuracy; len(accuracy) == 0 {
			set["accuracy"] = nil
		}
	}
	s.rampSet(f, set)
	s.testerSet(f, set)
	if f.changed("retired") {
		set["retired"] = f.Get("retired") == "yes"
	}
	return set
}

func (s *Server) rampSet(f *typedForm, set map[string]any) {
	rate, step, dwell := f.figure("ramp_rate"), f.figure("ramp_step"), f.figure("ramp_dwell")
	switch {
	case rate != nil && (step != nil || dwell != nil):
		f.refuse("ramp_rate", s.words.Say("office.instrument.ramp_both"))
	case (step == nil) != (dwell == nil):
		f.refuse("ramp_dwell", s.words.Say("office.instrument.ramp_half"))
	}
	if !f.changed("ramp_rate") && !f.changed("ramp_step") && !f.changed("ramp_dwell") {
		return
	}
	switch {
	case rate != nil:
		set["ramp"] = map[string]any{"ma_per_s": *rate}
	case step != nil && dwell != nil:
		set["ramp"] = map[string]any{"step_ma": *step, "dwell_ms": *dwell}
	default:
		set["ramp"] = nil
	}
}

// testerSet reads what is asked of a tester without a current source, and of the gauge kept with an instrument.
func (s *Server) testerSet(f *typedForm, set map[string]any) {
	resistor, volts := f.figure("test_resistor_ohm"), f.figure("test_nominal_v")
	if resistor != nil && volts != nil {
		f.refuse("test_resistor_ohm", s.words.Say("office.instrument.tester_both"))
	}
	f.setFigure(set, "test_resistor_ohm", "test_resistor_ohm", resistor)
	f.setFigure(set, "test_nominal_v", "test_nominal_v", volts)
	gauge, ok := forms.GaugeMass(f.line("retention_gauge", 40))
	if !ok {
		f.refuse("retention_gauge", s.words.Say("office.instrument.gauge_wrong"))
	}
	f.setText(set, "retention_gauge", "retention_gauge", gauge)
}

func instrumentValues(i store.Instrument) map[string]string {
	out := map[string]string{"name": i.Name, "serial": i.Serial, "calibration_due": i.CalibrationDue.String(), "ramp_rate": "", "ramp_step": "", "ramp_dwell": "", "retired": "",
		"test_resistor_ohm": figureOrNone(i.TestResistorOhm), "test_nominal_v": figureOrNone(i.TestNominalV), "retention_gauge": i.RetentionGauge}
	for _, code := range accuracyCodes {
		out["percent."+code], out["plus."+code] = figureOrNone(i.Accuracy[code].Percent), figureOrNone(i.Accuracy[code].Plus)
	}
	if i.Ramp != nil {
		out["ramp_rate"], out["ramp_step"], out["ramp_dwell"] = figureOrNone(i.Ramp.RateMAPerS), figureOrNone(i.Ramp.StepMA), figureOrNone(i.Ramp.DwellMS)
	}
	if i.Retired {
		out["retired"] = "yes"
	}
	return out
}

func figureOrNone(v float64) string {
	if v == 0 {
		return ""
	}
	return strconv.FormatFloat(v, 'f', -1, 64)
}

func (s *Server) instrumentOf(c echo.Context) (found store.Instrument, err error) {
	err = s.store.View(scope(c), func(v *store.View) error {
		all, err := v.Instruments()
		for _, i := range all {
			if i.ID == c.Param("instrument") {
				found = i
				return nil
			}
		}
		if err != nil {
			return err
		}
		return refuse(codeNotFound, "", s.words.Say("office.instrument.unknown"))
	})
	return found, err
}

func (s *Server) instrumentForm(c echo.Context, i *store.Instrument) formPage {
	k := s.ink()
	accuracy := fieldGroup{Legend: k.say("office.instrument.group_accuracy"), Note: k.say("office.instrument.accuracy_note")}
	for _, code := range accuracyCodes {
		accuracy.Fields = append(accuracy.Fields,
			field{Name: "percent." + code, Label: k.say("office.instrument.percent", "name", k.reading(code)), Type: "number", Unit: "%"},
			field{Name: "plus." + code, Label: k.say("office.instrument.plus", "name", k.reading(code)), Type: "number", Unit: k.named("unit", unitOf(code))})
	}
	p := formPage{
		Frame: s.frame(c, k.say("office.instrument.new"), "set-up"), Crumbs: []link{{Href: "/set-up", Text: k.say("office.setup.title")}},
		Heading: k.say("office.instrument.new_head"), Action: "/instruments", Submit: k.say("office.instrument.save"), Cancel: "/set-up",
		Groups: []fieldGroup{
			{Legend: k.say("office.instrument.group_what"), Fields: []field{
				{Name: "name", Label: k.say("office.instrument.name"), Hint: k.say("office.instrument.name_hint"), Required: true},
				{Name: "serial", Label: k.say("office.instrument.serial")},
				{Name: "calibration_due", Label: k.say("office.instrument.calibration"), Type: "date"},
			}},
			accuracy,
			{Legend: k.say("office.instrument.group_ramp"), Note: k.say("office.instrument.ramp_note"), Fields: []field{
				{Name: "ramp_rate", Label: k.say("office.instrument.rate"), Type: "number", Unit: "mA/s"},
				{Name: "ramp_step", Label: k.say("office.instrument.step"), Type: "number", Unit: k.named("unit", "mA")},
				{Name: "ramp_dwell", Label: k.say("office.instrument.dwell"), Type: "number", Unit: k.named("unit", "ms")},
			}},
			{Legend: k.say("office.instrument.group_tester"), Note: k.say("office.instrument.tester_note"), Fields: []field{
				{Name: "test_resistor_ohm", Label: k.say("office.instrument.resistor"), Type: "number", Unit: k.named("unit", "ohm")},
				{Name: "test_nominal_v", Label: k.say("office.instrument.at_voltage"), Type: "number", Unit: k.named("unit", "V")},
				{Name: "retention_gauge", Label: k.say("office.instrument.gauge"), Hint: k.say("office.instrument.gauge_hint")},
			}},
		},
	}
	if i != nil {
		p.Frame, p.Heading = s.frame(c, i.Name, "set-up"), k.say("office.instrument.edit_head", "name", i.Name)
		p.Action = "/instruments/" + i.ID
		p.Groups[0].Fields = append(p.Groups[0].Fields, field{Name: "retired", Label: k.say("office.instrument.retired"), Hint: k.say("office.instrument.retired_hint"), Type: "check"})
	}
	return p
}

// instrumentRow is an instrument in the list of the set-up page.
type instrumentRow struct {
	Href, Name, Serial, Calibration, Ramp string
	Late                                  bool
	Accuracy                              []string
}

func (s *Server) instrumentRow(i store.Instrument, today forms.Day) instrumentRow {
	k := s.ink()
	row := instrumentRow{Name: i.Name, Serial: i.Serial, Calibration: k.day(i.CalibrationDue)}
	row.Href = "/instruments/" + i.ID + "/past"
	if i.CalibrationDue != forms.NoDay && i.CalibrationDue < today {
		row.Late, row.Calibration = true, k.say("office.instrument.overdue", "day", row.Calibration)
	}
	if i.Retired {
		row.Late, row.Calibration = false, k.say("office.instrument.retired")
	}
	for _, code := range sortedKeys(i.Accuracy) {
		a := i.Accuracy[code]
		plus := k.amount(number(a.Plus), unitOf(code))
		switch {
		case a.Percent != 0 && a.Plus != 0:
			row.Accuracy = append(row.Accuracy, k.say("office.instrument.accuracy_line", "name", k.reading(code), "percent", number(a.Percent), "plus", plus))
		case a.Percent != 0:
			row.Accuracy = append(row.Accuracy, k.say("office.instrument.accuracy_percent", "name", k.reading(code), "percent", number(a.Percent)))
		default:
			row.Accuracy = append(row.Accuracy, k.say("office.instrument.accuracy_plus", "name", k.reading(code), "plus", plus))
		}
	}
	switch r := i.Ramp; {
	case r == nil:
		row.Ramp = dash
	case r.RateMAPerS != 0:
		row.Ramp = k.amount(number(r.RateMAPerS), "mA/s")
	default:
		row.Ramp = k.say("office.instrument.ramp_step", "step", k.amount(number(r.StepMA), "mA"), "dwell", k.amount(number(r.DwellMS), "ms"))
	}
	return row
}
