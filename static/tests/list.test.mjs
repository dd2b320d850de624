import test from "node:test";
import assert from "node:assert/strict";
import { dueNow, grouped, matches, overlay, placeInRound, withOwn } from "../list.mjs";
import { bareTag, parseRoute } from "../route.mjs";
import { along, drawing, ticks, WIDTH } from "../scale.mjs";
import { limitWords, outsideWords } from "../limit-words.mjs";
import { speaker } from "../words.mjs";
import { readFileSync } from "node:fs";

const say = speaker(JSON.parse(readFileSync(new URL("../words/en.json", import.meta.url))));
const today = "2026-12-01";
const due = (task, state, day = "2026-11-30") => ({ task, due: day, state });
const devices = [
  { id: "a", place: "p1", tag: "K7QM2P3", panel: "LP-2", circuit: "14", kind: "gfci-receptacle", due: [due("button", "overdue")] },
  { id: "b", place: "p1", kind: "gfci-receptacle", due: [due("button", "upcoming", "2027-01-31")] },
  { id: "c", place: "p2", kind: "rcd", due: [due("button", "due"), due("instrument", "never-tested")] },
];

test("list: due now leaves out what lies ahead, worst first", () => {
  assert.deepEqual(devices.map((d) => dueNow(d, today).map((x) => x.task)), [["button"], [], ["instrument", "button"]]);
  assert.equal(dueNow(devices[1], "2027-01-31").length, 1, "a copy from last month still shows what has come due since");
});

test("list: the next outlet is the next that wants the same task, in walking order, once round", () => {
  assert.deepEqual(placeInRound(devices, "c", "button", today), { n: 2, of: 2 });
});

test("list: own entries are laid over; a measured test with the button pressed also meets the button plan", () => {
  const row = { saved: 1, state: "waiting", summary: { entry: "e", device: "c", task: "instrument", day: today, result: "pass", numbers: { trip_time_ms: 25 }, readings: { button_trips: { value: "yes" }, button_resets: { value: "yes" } } } };
  const laid = withOwn(devices[2], overlay([row]).get("c"));
  assert.deepEqual(laid.due, []);
  assert.equal(laid.last.button, undefined, "it moves the button's date, it is no button entry");
  assert.equal(laid.last.instrument.unsent, true);
  assert.equal(devices[2].due.length, 2, "the copy itself stays as it was");
  const untested = withOwn(devices[2], overlay([{ ...row, summary: { ...row.summary, result: "not-tested" } }]).get("c"));
  assert.equal(untested.due.length, 2, "could not test never moves a date");
  for (const state of ["kept", "refused"]) assert.equal(overlay([{ ...row, state }]).size, 0, state);
});

test("list: an injected trip alone does not meet the button plan", () => {
  const own = [{ entry: "e", task: "instrument", day: today, result: "pass", numbers: {}, readings: {} }];
  assert.deepEqual(withOwn(devices[2], own).due.map((d) => d.task), ["button"]);
});

test("list: found by tag, place, and circuit", () => {
  const place = { name: "Pantry, by the sink", room: "Kitchen", floor: "Ground floor" };
  for (const typed of ["k7q-m2", "K7QM2P3", "sink", "pantry ground", "LP-2 / 14", "lp-2"]) assert.ok(matches(devices[0], place, typed), typed);
  for (const typed of ["attic", "zzz-9", "LP-3"]) assert.ok(!matches(devices[0], place, typed), typed);
});

test("list: grouped by building, floor and room without changing the order", () => {
  const places = new Map([["p1", { floor: "1", room: "Bath" }], ["p2", { floor: "2" }]]);
  assert.deepEqual(grouped(devices, places).map((g) => [g.name, g.devices.length]), [["1 · Bath", 2], ["2", 1]]);
});

test("route: pages and labels in any letter case", () => {
  assert.deepEqual(parseRoute("#/test/id/button"), { page: "test", device: "id", task: "button" });
  assert.deepEqual(parseRoute("", "/T/k7q-m2p-3"), { page: "tag", tag: "K7QM2P3" });
  assert.deepEqual(parseRoute("#tag=k7qm2p3"), { page: "tag", tag: "K7QM2P3" });
  assert.deepEqual(parseRoute("#/site/NORTH%2D1"), { page: "site", code: "NORTH-1" });
  assert.deepEqual(parseRoute("#/nonsense"), { page: "sites" });
  assert.equal(bareTag("Kl0-OiM"), "K1001M");
});

test("route: an address that cannot be decoded leads to the start", () => assert.deepEqual(parseRoute("#/site/%E0%A4"), { page: "sites" }));

const log = { shape: "log", from: 10, to: 10000 };
test("scale: logarithmic places and decades", () => {
  assert.deepEqual(ticks(log), [10, 100, 1000, 10000]);
  const third = along(log, 100) - along(log, 10);
  assert.ok(Math.abs(third - (along(log, 1000) - along(log, 100))) < 1e-9);
  assert.equal(along(log, 0), along(log, 10), "a log scale holds zero at its end");
  assert.ok(along(log, 1e6) < WIDTH);
});

test("scale: band, today's mark and what lies beyond", () => {
  const d = drawing(log, { bounds: { max: 4677 }, value: 20000, last: 610 });
  assert.equal(d.band.left, false);
  assert.equal(d.band.right, true);
  assert.equal(d.mark.beyond, "above");
  assert.ok(d.lastMark.x < d.band.x + d.band.width);
  assert.deepEqual(ticks({ shape: "linear", from: 2, to: 10 }), [2, 4, 6, 8, 10]);
  assert.deepEqual(ticks({ shape: "linear", from: 90, to: 140 }), [100, 120, 140]);
});

test("words: limits and what lies outside them", () => {
  assert.equal(limitWords(say, { max: 4676.61 }, "ms", "must"), "at most 4\u202f677\u202fms");
  assert.equal(limitWords(say, { min: 4, max: 6 }, "mA", "must"), "4 to 6\u202fmA");
  assert.equal(outsideWords(say, { verdict: "fail", limit: { min: 4, max: 6 } }, "mA", { value: 6.4 }), "Outside: 0.4\u202fmA too high");
  assert.equal(outsideWords(say, { verdict: "fail", limit: { max: 300 } }, "ms", { value: 320 }), "Outside: 20\u202fms too slow");
  assert.equal(outsideWords(say, { verdict: "fail", limit: { min: 115 } }, "g", { value: 90 }), "Outside: 25\u202fg too low");
  assert.equal(outsideWords(say, { verdict: "pass" }, "g", { value: 190 }), "Inside the limit");
});
