import test from "node:test";
import assert from "node:assert/strict";
import { readdirSync, readFileSync } from "node:fs";
import { criticalLoads, darkEntry, darkForm, sweepFacts, sweepRows } from "../dark-sweep.mjs";
import { limitSetFor } from "../judging.mjs";
import { ahead, behind, hangOn } from "../protection-map.mjs";

const data = new URL("../../forms/data/", import.meta.url);
const read = (dir) => readdirSync(new URL(dir, data)).flatMap((f) => JSON.parse(readFileSync(new URL(dir + f, data))));
const forms = read("forms/"), sets = read("limits/");
const devices = [
  { id: "g", kind: "gfci-receptacle", place: "p0", fields: {} },
  { id: "a", kind: "protected-receptacle", place: "p1", fields: { fed_by: "g" }, seen: "00000000000000aa" },
  { id: "b", kind: "protected-receptacle", place: "p2", fields: { fed_by: "g" } },
  { id: "c", kind: "receptacle", place: "p3", fields: {} },
];
const [g, a, b, c] = devices;
const entry = (device, said) => {
  const form = darkForm(forms, device);
  return darkEntry({ device, form, limitSet: limitSetFor(device, form, sets), said });
};

test("sweep: the map's outlets first, then what went dark beside it", () => {
  const rows = sweepRows(devices, g, new Map([["a", "live"], ["c", "dark"]]));
  assert.deepEqual(rows.map((r) => [r.device.id, r.mapped, r.said]), [["a", true, "live"], ["b", true, undefined], ["c", false, "dark"]]);
  const facts = sweepFacts({ rows, protector: g, words: (d) => `lost ${d.id}`, newId: () => "x" });
  assert.deepEqual(facts.map((f) => [f.kind, f.subject, f.body.set?.fed_by ?? f.body.device]), [["device.set", "c", "g"], ["defect.opened", "x", "a"]]);
  assert.equal(sweepFacts({ rows, protector: g, words: String, newId: () => "x", fails: (d) => d.id === "a" }).length, 1, "its own entry says so already");
});

test("sweep: an outlet behind the device that went dark is protected, one that stayed live fails", () => {
  const dark = entry(a, "dark");
  assert.equal(dark.readings.load_dead_when_tripped.value, "yes");
  assert.notEqual(dark.verdict.result, "fail");
  assert.notEqual(dark.verdict.result, "pass", "its wiring was not measured");
  const live = entry(b, "live");
  assert.equal(live.verdict.result, "fail");
  assert.ok(live.verdict.findings.some((f) => f.text === "limit.lost_protection"));
});

test("sweep: a plain outlet that went dark is not tested, one that stayed live says nothing of itself", () => {
  const dark = entry(c, "dark");
  assert.deepEqual([dark.readings.found.value, dark.verdict.result], ["no-power", "not-tested"]);
  assert.equal(entry(c, "live"), null);
});

test("sweep: TEST names the critical loads behind it, its own first, each once", () => {
  const places = new Map([["p0", { critical_load: "Freezer" }], ["p1", { critical_load: "Vaccine refrigerator" }], ["p2", { critical_load: "Freezer" }]]);
  assert.deepEqual(criticalLoads(devices, places, g), ["Freezer", "Vaccine refrigerator"]);
});

const wired = (id, kind, fed_by, circuit) => ({ id, kind, fields: { ...(fed_by ? { fed_by } : {}), ...(circuit ? { circuit } : {}) } });
const house = [wired("breaker", "gfci-breaker", "", "14"), wired("pantry", "gfci-receptacle", "", "14"), wired("door", "protected-receptacle", "pantry", "14"), wired("hall", "receptacle", "door"),
  wired("x", "gfci-receptacle", "y"), wired("y", "gfci-receptacle", "x"), wired("desk", "receptacle", "gone", "16")];
const of = (id) => house.find((d) => d.id === id), ids = (list) => list.map((d) => d.id);

test("map: what is ahead of an outlet, nearest first, and what goes dark with a device", () => {
  assert.deepEqual(ids(ahead(house, of("hall"))), ["door", "pantry", "breaker"]);
  assert.deepEqual(ids(behind(house, of("breaker"))), ["pantry", "door", "hall"]);
  assert.deepEqual(ids(behind(house, of("pantry"))), ["door", "hall"]);
  assert.deepEqual(ids(hangOn(house, of("door"))), ["hall"]);
  assert.deepEqual(ids(ahead(house, of("desk"))), []);
});

test("map: a ring is walked round once", () => {
  assert.deepEqual([ids(ahead(house, of("x"))), ids(behind(house, of("x")))], [["y"], ["y"]]);
});

test("sweep: an outlet behind a nearer protector stays on that one", () => {
  const rows = sweepRows(house, of("breaker"), new Map([["door", "dark"], ["desk", "dark"]]));
  assert.deepEqual(sweepFacts({ rows, protector: of("breaker"), devices: house, words: String, newId: () => "x" }).map((f) => [f.subject, f.body.set.fed_by]), [["desk", "breaker"]]);
});
