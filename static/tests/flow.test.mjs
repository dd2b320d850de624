import test from "node:test";
import assert from "node:assert/strict";
import { readFileSync } from "node:fs";
import { fillMissing, quickAnswers, walk } from "../flow.mjs";
import { newDraft, withAnswers, withSeries, seriesAnswers } from "../draft.mjs";
import { leavesOff, stillOff } from "../still-off.mjs";

// The shipped forms themselves, as the phone gets them.
const form = (name) => JSON.parse(readFileSync(new URL(`../../forms/data/forms/${name}.json`, import.meta.url)));
const instrument = form("gfci-receptacle-instrument"), button = form("gfci-receptacle-button"), rcd = form("rcd-instrument"), hospital = form("hospital-receptacle-receptacle");

const draftOf = (answers, f = instrument) => ({ ...newDraft({ device: "d", task: f.task, log: "l", form: f.form, now: 1000 }), answers });
const pick = (x) => ({ pick: x });
const typed = (x) => ({ typed: x });
const codes = (w) => w.steps.flatMap((s) => s.asks.map((a) => a.reading));
const given = { kind: "gfci-receptacle" };
const stepOf = (w, name) => w.steps.find((s) => s.step === name);

const answered = (d, code, answer, at) => withAnswers(d, { ...d.answers, [code]: answer }, at);

test("flow: damage that ends the form leaves nothing more to ask", () => {
  const w = walk(instrument, draftOf({ condition: pick("burnt"), found: pick("on") }), given);
  assert.deepEqual(codes(w), ["condition"]);
  assert.equal(w.ended, "condition");
  assert.deepEqual(w.open, []);
  assert.deepEqual(w.readings, { condition: { value: "burnt" } }, "an answer to a question no longer put is not recorded");
});

test("flow: injection stays closed until the ground path is confirmed, and says why", () => {
  const before = walk(instrument, draftOf({ condition: pick("sound"), found: pick("on") }), given);
  assert.equal(stepOf(before, "inject").closed, "caution.closed_inject");
  assert.ok(!codes(before).includes("trip_time_ms"));
  const after = walk(instrument, draftOf({ condition: pick("sound"), found: pick("on"), wiring: pick("correct"), ground_continuous: pick("yes") }), given);
  assert.equal(stepOf(after, "inject").closed, null);
  assert.ok(codes(after).includes("trip_time_ms"));
});

test("flow: injection closes again when the lamps show an open ground", () => {
  const w = walk(instrument, draftOf({ condition: pick("sound"), found: pick("on"), wiring: pick("open-ground"), ground_continuous: pick("yes"), trip_time_ms: typed("25") }), given);
  assert.notEqual(stepOf(w, "inject").closed, null);
  assert.equal(w.readings.trip_time_ms, undefined);
});

test("flow: no ground permitted: nothing is injected, the marking is asked, continuity is not", () => {
  const w = walk(instrument, draftOf({ condition: pick("sound"), found: pick("on"), ground_continuous: pick("yes") }), { ...given, equipment_ground: "none-permitted" });
  assert.notEqual(stepOf(w, "inject").closed, null);
  assert.ok(codes(w).includes("marking_present"));
  assert.ok(!codes(w).includes("ground_continuous"));
});

test("flow: isolated supply: lamps are not asked and nothing is injected", () => {
  const w = walk(instrument, draftOf({ condition: pick("sound"), found: pick("on"), ground_continuous: pick("yes") }), { ...given, supply: "isolated" });
  assert.ok(!codes(w).includes("wiring"));
  assert.notEqual(stepOf(w, "inject").closed, null);
});

test("flow: required questions without an answer are open, a reason closes them", () => {
  const draft = draftOf({ condition: pick("sound") }, button);
  const w = walk(button, draft, given);
  assert.deepEqual(w.open.map((o) => o.id), ["found", "button_trips", "button_resets"]);
  const filled = { ...draft, ...fillMissing(w, draft, "no-access") };
  const after = walk(button, filled, given);
  assert.deepEqual(after.open, []);
  assert.deepEqual(after.readings.button_trips, { missing: "no-access" });
});

test("flow: an answer that cannot be read is open and named", () => {
  const w = walk(instrument, draftOf({ condition: pick("sound"), found: pick("on"), wiring: pick("correct"), ground_continuous: pick("yes"), trip_time_ms: typed("1,234") }), given);
  assert.deepEqual(w.broken, ["trip_time_ms"]);
  assert.equal(w.readings.trip_time_ms, undefined);
});

test("flow: a device that did not trip gives a bound, with or without a figure", () => {
  const base = { condition: pick("sound"), found: pick("on"), wiring: pick("correct"), ground_continuous: pick("yes") };
  const with310 = walk(instrument, draftOf({ ...base, trip_time_ms: { typed: "2", unit: "s", gave_up: true } }), given);
  assert.deepEqual(with310.readings.trip_time_ms, { typed: "2", unit: "s", above: 2000 });
  const without = walk(instrument, draftOf({ ...base, trip_time_ms: { typed: "", gave_up: true } }), given);
  assert.deepEqual(without.readings.trip_time_ms, { no_trip: true });
});

test("flow: one tap writes exactly the answers it states, never a number", () => {
  const w = walk(button, withAnswers(draftOf({}, button), quickAnswers(button), 2000), given);
  assert.deepEqual(Object.fromEntries(Object.entries(w.readings).map(([k, r]) => [k, r.value])), button.quick.readings);
  assert.deepEqual(w.open, []);
});

test("flow: an RCD is asked at ½, 1 and 5 times, 5 only up to 30 mA", () => {
  const answers = { condition: pick("sound"), found: pick("on"), ground_continuous: pick("yes") };
  const rows = (ma, more = {}) => stepOf(walk(rcd, draftOf({ ...answers, ...more }, rcd), { kind: "rcd", rated_residual_ma: ma }), "inject").series.map((r) => `${r.at.multiple}@${r.at.phase_deg}`);
  assert.deepEqual(rows(30), ["0.5@0", "0.5@180", "1@0", "1@180", "5@0", "5@180"]);
  assert.deepEqual(rows(100), ["0.5@0", "0.5@180", "1@0", "1@180"]);
  assert.deepEqual(rows(100, { holds_at_half: pick("yes") }), ["1@0", "1@180"]);
});

test("flow: a row of a series is recorded under its conditions", () => {
  const at = { multiple: 5, phase_deg: 180 };
  let draft = draftOf({ condition: pick("sound"), found: pick("on"), ground_continuous: pick("yes"), holds_at_half: pick("yes") }, rcd);
  draft = withSeries(draft, at, "trip_time_ms", typed("24"), 2000);
  assert.deepEqual(seriesAnswers(draft, { phase_deg: 180, multiple: 5 }), { trip_time_ms: typed("24") });
  const w = walk(rcd, draft, { kind: "rcd", rated_residual_ma: 30 });
  assert.deepEqual(w.series, [{ at, trip_time_ms: { typed: "24", unit: "ms", value: 24 } }]);
  assert.deepEqual(w.open.filter((o) => o.at).map((o) => `${o.at.multiple}@${o.at.phase_deg}`), ["1@0", "1@180", "5@0"]);
});

test("flow: a duplex outlet is asked for both faces, a single one once", () => {
  const answers = { condition: pick("sound"), found: pick("on"), wiring: pick("correct"), ground_continuous: pick("yes") };
  const step = (faces) => stepOf(walk(hospital, draftOf(answers, hospital), { kind: "hospital-receptacle", faces }), "retention");
  assert.deepEqual(step(2).series.map((r) => r.at.face), ["upper", "lower"]);
  assert.deepEqual(step(1).series, []);
  assert.deepEqual(step(1).asks.map((a) => a.reading), ["retention_g", "retention_holds"]);
});

test("flow: a gauge answer stands for the grams", () => {
  const answers = { condition: pick("sound"), found: pick("on"), wiring: pick("correct"), ground_continuous: pick("yes"), retention_holds: pick("yes") };
  assert.deepEqual(walk(hospital, draftOf(answers, hospital), { kind: "hospital-receptacle", faces: 1 }).open, []);
});

test("flow: a condition sees only what was answered before it", () => {
  const w = walk(button, draftOf({ condition: pick("sound"), found: pick("tripped"), button_resets: pick("no") }, button), given);
  assert.equal(w.ended, "button_resets");
  assert.deepEqual(w.open, []);
});

test("flow: cautions stand where they apply", () => {
  const cautions = (answers, more) => walk(instrument, draftOf(answers), { ...given, ...more }).steps.flatMap((s) => s.cautions);
  const base = { condition: pick("sound"), found: pick("on") };
  assert.ok(!cautions(base).includes("no_power"));
  assert.ok(cautions({ ...base, found: pick("no-power") }).includes("no_power"));
  assert.ok(!cautions(base).includes("isolated_monitor"));
  assert.ok(cautions(base, { supply: "isolated" }).includes("isolated_monitor"));
});

test("still off: from went off until back is answered, with the time it went off", () => {
  let d = answered(draftOf({ condition: pick("sound"), found: pick("on") }, button), "button_trips", pick("yes"), 5000);
  const walked = (x) => walk(button, x, given);
  assert.equal(d.off_since, 5000);
  assert.ok(leavesOff(d, walked(d)));
  d = answered(d, "load_dead_when_tripped", pick("yes"), 6000);
  assert.deepEqual(stillOff([d], walked), [{ device: "d", task: "button", since: 5000 }]);
  assert.deepEqual(stillOff([answered(d, "button_resets", pick("yes"), 7000)], walked), []);
  assert.deepEqual(stillOff([answered(d, "button_trips", pick("no"), 7000)], walked), []);
});

test("still off: a reset before the button was pressed does not count", () => {
  const d = draftOf({ condition: pick("sound"), found: pick("tripped"), button_resets: pick("yes"), button_trips: pick("yes") }, button);
  assert.ok(leavesOff(d, walk(button, d, given)));
});
