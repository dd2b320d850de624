import test from "node:test";
import assert from "node:assert/strict";
import { nextInWalk, roomMates, toReturn, walkCounts } from "../walk-round.mjs";

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
