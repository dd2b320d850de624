package forms

import (
	"fmt"
	"math/rand"
	"reflect"
	"strings"
	"testing"
)

// What closes a defect and what does not is common practice, no source: a repair is proved by the test that failed.
func TestDefects_Life(t *testing.T) {
	const byHand, derived = "0193e3c0-0000-7000-8000-000000000001", "button_trips@1"
	fail := func(n int) DefectEvent {
		return DefectEvent{What: "test", ID: fmt.Sprint(n), Clock: uint64(n), Result: Fail, Task: "button", Failed: []FailedCause{{"button_trips", SeverityUnsafe}}}
	}
	pass := func(n int) DefectEvent {
		return DefectEvent{What: "test", ID: fmt.Sprint(n), Clock: uint64(n), Result: Pass, Task: "button", Passed: []string{"button_trips", "task:button"}}
	}
	said := func(n int, what string) DefectEvent {
		return DefectEvent{What: what, ID: fmt.Sprint(n), Clock: uint64(n), Defect: "anything", Text: what, Due: NoDay}
	}
	of := func(e DefectEvent, id string) DefectEvent { e.Defect = id; return e }
	opened := func(n int) DefectEvent {
		return DefectEvent{What: "opened", ID: fmt.Sprint(n), Clock: uint64(n), Defect: byHand, Text: "face cracked", Due: NoDay}
	}
	newer := func(e DefectEvent, task string) DefectEvent {
		e.Newer, e.Task, e.Passed = true, task, []string{"trip_time_ms", "task:" + task}
		return e
	}
	other := DefectEvent{What: "test", ID: "9", Clock: 9, Result: Pass, Task: "receptacle", Passed: []string{"retention_g", "task:receptacle"}}
	tests := []struct {
		name   string
		events []DefectEvent
		want   string // state of each defect, oldest first, with ! where it is still in use
	}{
		{"a fail opens it", []DefectEvent{fail(1)}, "open!"},
		{"a second fail is the same defect", []DefectEvent{fail(1), fail(2)}, "open!"},
		{"a pass alone closes nothing", []DefectEvent{fail(1), pass(2)}, "open!"},
		{"made safe", []DefectEvent{fail(1), said(2, "made_safe")}, "made-safe"},
		{"a fail after it was made safe: it had power", []DefectEvent{fail(1), said(2, "made_safe"), fail(3)}, "open!"},
		{"assigned and not safe", []DefectEvent{fail(1), said(2, "assigned")}, "assigned!"},
		{"repaired waits for the test", []DefectEvent{fail(1), said(2, "made_safe"), said(3, "repaired")}, "repaired"},
		{"a pass after the repair closes", []DefectEvent{fail(1), said(2, "repaired"), pass(3)}, "closed"},
		{"a pass before the repair does not", []DefectEvent{fail(1), pass(2), said(3, "repaired")}, "repaired!"},
		{"a fail after the repair: not repaired", []DefectEvent{fail(1), said(2, "repaired"), fail(3), pass(4)}, "open!"},
		{"another test's pass does not close", []DefectEvent{fail(1), said(2, "repaired"), other}, "repaired!"},
		{"closed without a test stays open", []DefectEvent{fail(1), said(2, "closed")}, "open!"},
		{"and is closed by the test that comes", []DefectEvent{fail(1), said(2, "closed"), pass(3)}, "closed"},
		{"closed after a pass without a repair", []DefectEvent{fail(1), pass(2), said(3, "closed")}, "closed"},
		{"reopened", []DefectEvent{fail(1), said(2, "repaired"), pass(3), of(said(4, "reopened"), derived)}, "open!"},
		{"a reopened one needs a new repair and test", []DefectEvent{fail(1), said(2, "repaired"), pass(3), of(said(4, "reopened"), derived), pass(5)}, "open!"},
		{"a fail after it was closed is another defect", []DefectEvent{fail(1), said(2, "repaired"), pass(3), fail(4)}, "closed open!"},
		{"retired", []DefectEvent{fail(1), said(2, "retired")}, "closed"},
		{"replaced waits for the new device's test", []DefectEvent{fail(1), {What: "replaced", ID: "2", Clock: 2, With: "new", Due: NoDay}}, "repaired"},
		{"the new device's button is no full test", []DefectEvent{fail(1), {What: "replaced", ID: "2", Clock: 2, With: "new"}, newer(pass(3), "button")}, "repaired"},
		{"the new device's full test closes", []DefectEvent{fail(1), {What: "replaced", ID: "2", Clock: 2, With: "new"}, newer(pass(3), "instrument")}, "closed"},
		{"by hand", []DefectEvent{opened(1)}, "open!"},
		{"what is said of one does not touch another", []DefectEvent{fail(1), opened(2), of(said(3, "made_safe"), byHand)}, "open! made-safe"},
		{"what is said of the device touches all that is open", []DefectEvent{fail(1), opened(2), said(3, "made_safe")}, "made-safe made-safe"},
		{"by hand: repaired and any passing test", []DefectEvent{opened(1), said(2, "repaired"), other}, "closed"},
	}
	for _, test := range tests {
		t.Run(test.name, func(t *testing.T) {
			all, loose := Defects(test.events, func(cause, entry string) string { return cause + "@" + entry })
			var got []string
			for _, d := range all {
				s := d.State
				if d.InUse() {
					s += "!"
				}
				got = append(got, s)
			}
			if strings.Join(got, " ") != test.want || len(loose) > 0 {
				t.Errorf("got %v, loose %v, want %s", got, loose, test.want)
			}
			shuffled := append([]DefectEvent(nil), test.events...)
			rand.New(rand.NewSource(int64(len(test.name)))).Shuffle(len(shuffled), func(i, j int) { shuffled[i], shuffled[j] = shuffled[j], shuffled[i] })
			again, _ := Defects(shuffled, func(cause, entry string) string { return cause + "@" + entry })
			if !reflect.DeepEqual(all, again) {
				t.Errorf("in another order: got %+v, want %+v", again, all)
			}
		})
	}
}

func TestDefects_WhatIsSaidOfNoneIsKept(t *testing.T) {
	_, loose := Defects([]DefectEvent{{What: "made_safe", ID: "a", Defect: "x", Due: NoDay}}, nil)
	if len(loose) != 1 || loose[0] != "a" {
		t.Errorf("got %v, want the record that is about nothing", loose)
	}
}

func TestCausesOf_OnlyWhatWasTakenAndHeldIsFree(t *testing.T) {
	e := Entry{Readings: map[string]Reading{"button_trips": Answer("yes"), "trip_time_ms": Number(30), "retention_g": MissingFor("no-instrument")}}
	failed, passed := CausesOf("instrument", &e, Verdict{Result: Fail, Findings: []Finding{
		{Reading: "button_trips", Verdict: Pass}, {Reading: "trip_time_ms", Verdict: Fail}, {Reading: "trip_time_ms", Verdict: Pass},
		{Reading: "retention_g", Verdict: Missing}, {Reading: "trip_current_ma", Verdict: Fail, Severity: Nuisance}}})
	want := []FailedCause{{"trip_time_ms", SeverityUnsafe}, {"trip_current_ma", Nuisance}}
	if !reflect.DeepEqual(failed, want) || !reflect.DeepEqual(passed, []string{"button_trips"}) {
		t.Errorf("got %v and %v, want %v and button_trips", failed, passed, want)
	}
	failed, _ = CausesOf("receptacle", &Entry{}, Verdict{Result: Fail})
	if len(failed) != 1 || TaskOfCause(failed[0].Cause) != "receptacle" {
		t.Errorf("a fail of which only the outcome is known: got %v", failed)
	}
}
