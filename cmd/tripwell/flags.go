package main

import (
	"fmt"

	"tripwell/forms"
)

// folder is the flag of commands that work on a store.
type folder struct {
	Data string `name:"data" required:"" placeholder:"DIR" help:"Folder of the store."`
}

// author is the flag of commands that make records.
type author struct {
	By string `name:"by" placeholder:"PERSON" help:"Name or id of the person who makes these records; the first manager when left out."`
}

// dayFlag is a date given on the command line; the zero value is none.
type dayFlag struct {
	day   forms.Day
	given bool
}

// UnmarshalText reads 2026-12-31.
func (d *dayFlag) UnmarshalText(b []byte) error {
	day, err := forms.ParseDay(string(b))
	if err != nil {
		return err
	}
	d.day, d.given = day, true
	return nil
}

// text gives the date for a query, "" when none was given.
func (d dayFlag) text() string {
	if !d.given {
		return ""
	}
	return d.day.String()
}

// period is the flags of a range of test days, both ends included; an end left out is open.
type period struct {
	From dayFlag `name:"from" placeholder:"DATE" help:"First test day, as 2026-01-31; open when left out."`
	To   dayFlag `name:"to" placeholder:"DATE" help:"Last test day, included; open when left out."`
}

// check refuses a period that ends before it begins.
func (p period) check() error {
	if p.From.given && p.To.given && p.To.day < p.From.day {
		return usageError{fmt.Errorf("the period ends on %s, before it begins on %s: swap --from and --to", p.To.day, p.From.day)}
	}
	return nil
}
