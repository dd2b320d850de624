import test from "node:test";
import assert from "node:assert/strict";
import { readFileSync } from "node:fs";
import { entryBody, givenOf, summaryOf } from "../entry.mjs";
import { walk } from "../flow.mjs";
import { about, judgeWalked, limitSetFor } from "../judging.mjs";
import { makeRecord } from "../making.mjs";
import { checkRecord } from "../record.mjs";
import { newDraft } from "../draft.mjs";
import { syncing } from "../syncing.mjs";

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

/** A phone in memory against a scripted server. */
function phone(net, records = []) {
  const me = {}, dropped = [], covered = [];
  const state = { me: {}, sites: new Map(), records, offset: 0 };
  const tray = { setMe: async (k, v) => { me[k] = v; }, waiting: async () => records.filter((r) => r.state === "waiting"), records: async () => records.filter((r) => r.state !== "kept"),
    settle: async (i, receipt) => Object.assign(records.find((r) => r.id === i), { state: "sent", receipt }), refuse: async () => {}, forget: async () => {},
    waitingPhotos: async () => [], forgetPhotos: async () => {}, cover: async (ids) => ids.forEach((i) => { covered.push(i); records.find((r) => r.id === i).state = "kept"; }) };
  const along = { put: async () => {}, drop: async (log) => { dropped.push(log); } };
  let n = 0;
  return { me, state, dropped, covered, ...syncing({ state, tray, along, net, now: () => 1000, newId: () => `installation-${++n}`, changed: () => {} }) };
}
const ok = (body) => ({ ok: true, status: 200, body, offset: 0 });
const not = (status) => ({ ok: false, status, body: null, offset: 0 });
const logs = [{ log: "org" }, { log: "s1", code: "NORTH", name: "North" }];
const server = (more = {}) => ({ enrol: async () => ok({ token: "good", person: { id: "p", name: "Crew 1" }, logs }), logs: async (t) => (t === "good" ? ok({ logs }) : not(401)), snapshot: async () => ok({ site: { id: "s1" } }),
  push: async (t, body) => (t === "good" ? ok({ receipts: JSON.parse(body).records.map((r) => ({ id: r.record, state: "stored" })) }) : not(401)), ...more });

test("sync: enrols once, takes its sites along, keeps its installation", async () => {
  const p = phone(server());
  assert.equal((await p.run()).state, "empty");
  assert.equal(p.me.token, "good");
  assert.deepEqual([...p.state.sites.keys()], ["s1"]);
  await p.run();
  assert.equal(p.me.installation, "installation-1");
});

test("sync: a token that ended is renewed by the session, and what waited goes", async () => {
  const p = phone(server(), [{ id: "r1", record: "r1", log: "s1", state: "waiting" }]);
  Object.assign(p.state.me, { installation: "i", token: "old" });
  assert.equal((await p.run()).state, "empty");
  assert.deepEqual(p.covered, ["r1"], "the copy asked for afterwards holds it");
});

test("sync: a fresh copy is not taken again for every entry", async () => {
  let asked = 0;
  const p = phone(server({ snapshot: async () => { asked++; return ok({}); } }), [{ id: "r1", record: "r1", log: "s1", state: "waiting" }]);
  p.state.sites.set("s1", { log: "s1", taken: 900 });
  await p.run();
  assert.equal(asked, 0);
  assert.equal(p.state.records[0].state, "sent", "until then it is laid over");
  p.state.sites.set("s1", { log: "s1", taken: 1000 - 3 * 60_000 });
  await p.run();
  assert.deepEqual(p.covered, ["r1"]);
});

test("sync: somebody else who signed in takes over; the installation stays", async () => {
  let who = "p";
  const p = phone(server({ enrol: async () => ok({ token: "good", person: { id: who, name: who }, logs }) }));
  await p.run();
  who = "q";
  assert.equal(await p.takeOver(), true);
  assert.equal(p.me.person, "q");
  assert.equal(p.me.installation, "installation-1");
});

test("sync: signed out for good keeps everything and says so", async () => {
  const p = phone(server({ enrol: async () => not(401), push: async () => not(401) }), [{ id: "r1", record: "r1", log: "s1", state: "waiting" }]);
  Object.assign(p.state.me, { installation: "i", token: "old" });
  assert.equal((await p.run()).state, "signed-out");
  assert.equal(p.state.records[0].state, "waiting");
  assert.equal(p.state.me.token, "old", "the token is not thrown away either");
});

test("sync: a site that is no longer ours loses its copy, never what waits", async () => {
  const p = phone(server({ logs: async () => ok({ logs: [{ log: "org" }] }), push: async () => not(503) }), [{ id: "r1", record: "r1", log: "s1", state: "waiting" }]);
  p.state.sites.set("s1", { log: "s1", taken: 0 });
  assert.equal((await p.run()).state, "trouble");
  assert.deepEqual(p.dropped, ["s1"]);
  assert.equal(p.state.records[0].state, "waiting");
});

test("sync: one site the server cannot give just now does not keep the others away", async () => {
  const two = [...logs, { log: "s2", code: "SOUTH", name: "South" }];
  const p = phone(server({ logs: async () => ok({ logs: two }), snapshot: async (t, log) => (log === "s1" ? { ...not(500), body: { error: { text: "Something went wrong here. Reference 7." } } } : ok({})) }));
  assert.equal((await p.run()).state, "trouble");
  assert.deepEqual([...p.state.sites.keys()], ["s2"]);
  assert.equal(p.state.said, "Something went wrong here. Reference 7.");
});
