// Package forms is the trade: what is asked of a device, which limits a reading must satisfy, what a test result is,
// and when the next test is due. It is pure: no I/O, no clock, no randomness, and it imports no other package of ours.
// Everything that decides "inside or outside a limit" or "due or not" lives here and nowhere else.
//
// Forms, limit sets and plans are data (forms/data, embedded). static/judge.mjs is the same judge in JavaScript; both
// run testdata/verdicts.json and must give equal answers.
package forms

// JudgeVersion names the rules of Judge; it changes whenever the same entry under the same limits may get another verdict.
const JudgeVersion = 2
