package store

import (
	"encoding/json"
	"slices"

	"tripwell/forms"
	"tripwell/store/record"
)

// States of a stop.
const (
	StopLeft   = "left"
	StopDone   = "done"
	StopBack   = "back"   // nothing could be tested, or not enough: somebody must come back
	StopPassed = "passed" // passed over with a reason
)

// RoundStop is one test of a round.
type RoundStop struct {
	Device  string
	Task    string
	State   string
	Entry   string // the newest that counts; "" where there is none
	Result  string
	Day     forms.Day
	By      string
	Reason  string // why it was passed over
	Paper   bool   // the entry came from paper or a spreadsheet
	Retired bool
}

// stops reads how far the stops of a round are.
func (v *View) stops(sv *siteView, r *Round, list []string) error {
	passed := map[string]string{}
	for _, c := range r.Closings {
		for _, p := range c.Passed {
			passed[p.Device+"/"+p.Task] = p.Reason
		}
	}
	last := forms.Day(1<<31 - 1)
	if r.Accepted != nil {
		last = r.Accepted.Day
	}
	for _, text := range list {
		if !record.IsStop(text) {
			continue
		}
		stop := RoundStop{Device: text[:36], Task: text[37:], State: StopLeft, Day: forms.NoDay}
		if err := v.stop(sv, r, &stop, last); err != nil {
			return err
		}
		if why, ok := passed[text]; ok && stop.State == StopLeft {
			stop.State, stop.Reason = StopPassed, why
		}
		v.shownStop(&stop)
		r.Stops = append(r.Stops, stop)
	}
	return nil
}

// stop finds the tests that count for a stop: made after the round was, until the day it was accepted, or naming it. An
// entry that also meets the task (the button, by an instrument test) counts as well.
func (v *View) stop(sv *siteView, r *Round, stop *RoundStop, last forms.Day) error {
	d, err := v.deviceThing(sv, parseID(stop.Device))
	if err != nil || d == nil {
		return err
	}
	stop.Retired = d.value("#retired") != nil
	tests, err := v.history(sv, d.n)
	if err != nil {
		return err
	}
	made := forms.DayOf(r.Made.In(sv.zone))
	var best mark
	for _, p := range tests {
		meets := slices.Contains(p.met, stop.Task)
		if p.result == 0 || p.day > last || p.task != stop.Task && !meets {
			continue
		}
		if p.day < made-roundReach {
			continue
		}
		e, _, _, err := readBook(v.tx, p.seq)
		if err != nil {
			return err
		}
		var body struct{ Round, Source string }
		if json.Unmarshal(e.Body, &body) != nil {
			continue
		}
		if body.Round != r.ID && (p.day < made || int64(e.Clock>>16) < r.Made.UnixMilli()) {
			continue
		}
		m := mark{p.day, e.Clock, parseID(e.ID), p.result}
		done := meets || conclusive(p.result) || resultCodes[p.result] == forms.ConditionalFail
		switch {
		case stop.State == StopDone && !done, (stop.State == StopDone) == done && m.before(best):
			continue
		case done:
			stop.State = StopDone
		default:
			stop.State = StopBack
		}
		best = m
		stop.Entry, stop.Result, stop.Day, stop.By = e.ID, resultCodes[p.result], p.day, e.By
		stop.Paper = body.Source == "paper" || body.Source == "spreadsheet"
	}
	return nil
}

// StopTexts are the stops as a record names them: DEVICE/TASK, in walking order.
func (r *Round) StopTexts() []string {
	out := make([]string, len(r.Stops))
	for i, s := range r.Stops {
		out[i] = s.Device + "/" + s.Task
	}
	return out
}

// roundReach is how long before a round was made an entry may lie that names it: a sheet filled in by hand carries its own days.
const roundReach = 400
