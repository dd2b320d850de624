import test from "node:test";
import assert from "node:assert/strict";
import { readFileSync } from "node:fs";
import { entryBody, givenOf, summaryOf } from "../entry.mjs";
import { walk } from "../flow.mjs";
import { about, judgeWalked, limitSetFor } from "../judging.mjs";
import { makeRecord } from "../making.mjs";
import { checkRecord } from "../record.mjs";
import { newDraft } from "../draft.mjs";

const read = (path) => JSON.parse(readFileSync(new URL(`../../forms/data/${path}.json`, import.meta.url)));
const form = read("forms/gfci-receptacle-instrument");
const sets = [].concat(...["us-class-a", "us-receptacle", "iec-general", "iec-delayed"].map((n) => read(`limits/${n}`)));
const id = (n) => `01900000-0000-7000-8000-${String(n).padStart(12, "0")}`;
const device = { id: id(1), kind: "gfci-receptacle", supply: "grounded", fields: { rating_a: "20", nominal_v: 120, delayed: "", make: "Invented" } };
const instrument = { id: id(2), name: "Analyser", accuracy: { trip_time_ms: { percent: 2 } }, ramp: { ma_per_s: 0.5 }, calibration_due: "2027-03-01" };
const limitSet = limitSetFor(device, form, sets);
const given = givenOf({ device, form, limitSet, instrument });
const pick = (x) => ({ pick: x });
const answers = { condition: pick("sound"), found: pick("on"), wiring: pick("correct"), ground_continuous: pick("yes"), button_trips: pick("yes"), button_resets: pick("yes"), restored: pick("yes"), test_current_ma: { typed: "6,8" }, trip_time_ms: { typed: "5.2 s" } };
const draft = { ...newDraft({ device: device.id, task: "instrument", log: id(3), form: form.form, now: 1 }), answers };
const walked = walk(form, draft, given, limitSet);
const judged = { form, limitSet, given };

test("entry: given carries what the judgement needs, in the types it has", () => {
  assert.deepEqual(given, { kind: "gfci-receptacle", form_rev: 1, limit_set: "us-class-a", limit_rev: limitSet.revision, rating_a: 20, nominal_v: 120, supply: "grounded",
    instrument: id(2), accuracy: instrument.accuracy, ramp: instrument.ramp, calibration_due: "2027-03-01" });
});

// UL 943 Class A, T = (20 / I)^1.43 s: at 6.8 mA 4.68 s.
test("entry: the limit of the trip time is the one at the measured test current, before and after a time is typed", () => {
  const ask = form.steps.flatMap((s) => s.asks).find((a) => a.reading === "trip_time_ms");
  const verdict = judgeWalked(judged, walked);
  assert.equal(verdict.result, "fail");
  assert.equal(Math.round(about(judged, walked, verdict, ask).bounds.max), 4677);
  const before = walk(form, { ...draft, answers: { ...answers, trip_time_ms: undefined } }, given, limitSet);
  assert.equal(Math.round(about(judged, before, judgeWalked(judged, before), ask).bounds.max), 4677);
  const without = walk(form, { ...draft, answers: { ...answers, test_current_ma: undefined } }, given, limitSet);
  assert.equal(about(judged, without, judgeWalked(judged, without), ask).hint, "limit.no_test_current");
});

test("entry: a delayed RCD is judged by the delayed set, the register's own choice comes first", () => {
  const rcd = { kind: "rcd", fields: { delayed: true } };
  assert.equal(limitSetFor(rcd, { limit_set: "iec-general" }, sets).limit_set, "iec-delayed");
  assert.equal(limitSetFor({ ...rcd, fields: { limit_set: "iec-general" } }, { limit_set: "iec-general" }, sets).limit_set, "iec-general");
});

test("entry: the record keeps the rules of the book and its string is made once", () => {
  const body = entryBody({ form, given, readings: walked.readings, series: walked.series, shown: { result: "fail", limit_rev: 1, judge: 1 }, person: id(4), note: "“4,5” <&>" });
  const facts = { n: 1, clock: undefined, installation: id(5), person: id(4) };
  const made = makeRecord({ kind: "entry.made", log: id(3), subject: device.id, at: 1796112000123, offset: 0, body, ...facts });
  assert.equal(checkRecord(made.record), null);
  const parsed = JSON.parse(made.record);
  assert.deepEqual(parsed.body.readings.trip_time_ms, { typed: "5.2", unit: "s", value: 5200 });
  assert.deepEqual(parsed.body.readings.test_current_ma, { typed: "6,8", unit: "mA", value: 6.8 });
  assert.equal(parsed.at.length >= 24, true);
  assert.equal(Date.parse(parsed.at), 1796112000123, "at is this phone's clock, never altered");
  const next = makeRecord({ kind: "entry.made", log: id(3), subject: device.id, at: 1796111999000, offset: 0, body, ...facts, n: 2, clock: made.clock });
  assert.ok(next.clock > made.clock, "a clock set back never gives an earlier stamp");
});

test("entry: what lists show of it", () => {
  const s = summaryOf({ entry: "e", device: "d", task: "instrument", day: "2026-12-01", result: "fail", readings: walked.readings });
  assert.deepEqual(s.numbers, { test_current_ma: 6.8, trip_time_ms: 5200 });
  assert.deepEqual(s.readings, { button_trips: { value: "yes" }, button_resets: { value: "yes" } });
});

// The same file is run in Go (store/given_test.go), so that a phone and what takes in sheets say the same of a device.
const { cases } = JSON.parse(readFileSync(new URL("../../testdata/given.json", import.meta.url)));
for (const { name, device, instrument, given } of cases) {
  test(`given: ${name}`, () => {
    const { form_rev, ...got } = givenOf({ device, form, limitSet: null, instrument: instrument ?? null });
    assert.equal(form_rev, form.revision);
    assert.deepEqual(got, given);
  });
}
