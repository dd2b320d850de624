import test from "node:test";
import assert from "node:assert/strict";
import { nextInWalk, nextStop, roomMates, roundCounts, roundsHere, tellFirst, toReturn, walkCounts } from "../walk-round.mjs";

const today = "2026-12-01", due = [{ task: "button", due: "2026-11-30", state: "overdue" }];
const tried = (result, day = today) => ({ button: { result, day } });
const devices = [
  { id: "a", place: "p1", due }, { id: "b", place: "p1", due, last: tried("not-tested") }, { id: "c", place: "p2", due },
  { id: "d", place: "p3", due: [], last: tried("pass") }, { id: "e", place: "p3", due, last: tried("not-tested", "2026-11-29") },
];
const site = { devices, places: new Map([["p1", { room: "Kitchen" }], ["p2", { room: "Kitchen" }], ["p3", { room: "Hall" }]]) };

test("walk: what is done, left, passed over and to come back to is counted once each", () => {
  assert.deepEqual(walkCounts(devices, today, new Set(["c"])), { done: 1, left: 2, skipped: 1, back: 1 });
});

test("walk: it leads neither to what was locked today nor to what was passed over, but to what was locked earlier", () => {
  assert.equal(nextInWalk(devices, "a", "button", today, new Set(["c"])).id, "e");
  assert.equal(nextInWalk(devices, "e", "button", today, new Set(["a", "c"])), null);
});

test("walk: to come back to is what is still due and could not be tested the last time", () => {
  assert.deepEqual(toReturn(devices, today).map((d) => d.id), ["b", "e"]);
});

test("walk: a room is all its places, a portable item is alone", () => {
  assert.deepEqual(roomMates(site, devices[0]).map((d) => d.id), ["a", "b", "c"]);
  assert.deepEqual(roomMates(site, { id: "x" }).map((d) => d.id), ["x"]);
});

test("round: own tests and own words are laid over the copy; what was ended or given to others is not there", () => {
  const stops = [{ device: "a", task: "button" }, { device: "b", task: "button" }, { device: "c", task: "button", state: "passed" }, { device: "d", task: "instrument", state: "done" }, { device: "d", task: "button" }];
  const rounds = [{ id: "r1", made: 1000, stops }, { id: "r2", made: 1000, stops: [], people: ["x"] }, { id: "r3", made: 1000, stops: [] }, { id: "r4", made: 1000, stops: [], closed: ["me"] }];
  const own = (device, task, result, saved, readings = {}, state = "waiting") => ({ saved, state, summary: { device, task, result, readings } });
  const yes = { button_trips: { value: "yes" }, button_resets: { value: "yes" } };
  const rows = [own("a", "button", "pass", 900), own("b", "button", "not-tested", 2000), own("d", "instrument", "pass", 2000, yes), own("c", "button", "pass", 2000, {}, "refused"),
    { state: "waiting", saved: 2000, fact: { kind: "round.closed", subject: "r3" } }];
  const here = roundsHere(rounds, rows, "me", 0);
  assert.deepEqual(here.map((r) => r.id), ["r1"]);
  assert.deepEqual(here[0].stops.map((s) => s.state), ["", "back", "", "done", "done"]);
  assert.equal(roundsHere(rounds, [own("a", "button", "fail", 900)], "me", 200)[0].stops[0].state, "done"); // this phone's clock is 200 ms behind
});

test("round: it leads from stop to stop in its own order, past what was passed over, and counts each once", () => {
  const stops = [{ device: "a", task: "button", state: "done" }, { device: "b", task: "button", state: "" }, { device: "b", task: "instrument", state: "" }, { device: "c", task: "button", state: "" }];
  const passed = [{ device: "c", task: "button", reason: "in-use" }];
  assert.deepEqual(nextStop(stops, undefined, passed), stops[1]);
  assert.deepEqual(nextStop(stops, stops[1], passed), stops[2]);
  assert.deepEqual(nextStop(stops, stops[2], passed), stops[1]); // once round
  assert.deepEqual(nextStop(stops, stops[2], []), stops[3]);
  assert.equal(nextStop([stops[1]], stops[1], passed), undefined);
  assert.deepEqual(roundCounts(stops, passed), { done: 1, left: 2, skipped: 1, back: 0 });
});

test("round: whom to tell is said once for all places of one answer", () => {
  const nurse = { whom_to_tell: "Nurse in charge", test_from: "06:00", test_until: "08:30" };
  const list = tellFirst([{ name: "Pantry", ...nurse }, { name: "Hall" }, undefined, { name: "Ward", ...nurse }, { name: "Pit", critical_load: "Sump pump" }]);
  assert.deepEqual(list.map((o) => [o.names, o.who, o.load]), [[["Pantry", "Ward"], "Nurse in charge", undefined], [["Pit"], undefined, "Sump pump"]]);
});

test("rounds: what was handed over is walked by the colleague alone, and comes to the colleague although the round was given to another", () => {
  const rounds = [{ id: "r", made: 0, people: ["giver"], stops: ["a", "b", "c"].map((device) => ({ device, task: "button" })) }];
  const [given] = roundsHere(rounds, [], "giver", 0, { id: "r", given: ["b", "c"] });
  assert.deepEqual(given.stops.map((s) => s.state), ["", "given", "given"]);
  assert.deepEqual(roundCounts(given.stops, []), { done: 0, left: 1, skipped: 2, back: 0 });
  assert.equal(nextStop(given.stops, { device: "a", task: "button" }, []), undefined);
  assert.deepEqual(roundsHere(rounds, [], "taker", 0), []);
  const [taken] = roundsHere(rounds, [], "taker", 0, { id: "r", taken: ["b", "c"] });
  assert.deepEqual(taken.stops.map((s) => s.device), ["b", "c"]);
});
