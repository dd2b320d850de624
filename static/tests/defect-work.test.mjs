import assert from "node:assert/strict";
import { test } from "node:test";
import { onSameCircuit, openDefects, openedFact, saidFact } from "../defect-work.mjs";
import { checkRecord, newId } from "../record.mjs";
import { makeRecord } from "../making.mjs";
import { withFacts } from "../own-facts.mjs";

test("a failing test of this phone is a defect until the copy knows it; what was said after it counts", () => {
  const fail = { last: { button: { entry: "e1", result: "fail", own: true } } };
  assert.deepEqual(openDefects(fail).map((d) => [d.cause, d.severity, d.safe]), [["task:button", "unsafe", undefined]]);
  assert.equal(openDefects({ ...fail, made_safe: "breaker off" })[0].safe, "breaker off");
  const known = { ...fail, made_safe: "breaker off", defects: [{ id: "d", cause: "trip_time_ms", severity: "unsafe" }] };
  assert.deepEqual(openDefects(known).map((d) => [d.id, d.safe]), [["d", "breaker off"]]);
  assert.deepEqual(openDefects({ last: { button: { entry: "e1", result: "pass", own: true } } }), []);
});

test("made safe and repaired are laid over the copy until it holds them", () => {
  const snapshot = { devices: [{ id: "a", kind: "rcd", fields: {} }] };
  const fact = (kind, how, clock) => ({ ...saidFact(kind, { id: "a" }, how, () => "n"), clock });
  const { devices } = withFacts(snapshot, [fact("defect.made_safe", "breaker off", "1"), fact("defect.repaired", "terminal tightened", "2")], new Map());
  assert.deepEqual([devices[0].made_safe, devices[0].repaired], ["breaker off", "terminal tightened"]);
  assert.deepEqual(snapshot.devices[0].made_safe, undefined);
});

test("the breaker's other outlets", () => {
  const all = [{ id: "a", panel: "LP", circuit: "3" }, { id: "b", panel: "LP", circuit: "3" }, { id: "c", panel: "LP", circuit: "4" }];
  assert.deepEqual(onSameCircuit(all, all[0]).map((d) => d.id), ["b"]);
  const behind = [...all, { id: "d", panel: "LP", circuit: "9", place: "p", fields: { fed_by: "b" } }];
  assert.deepEqual(onSameCircuit(behind, all[0], new Map([["p", { critical_load: "Freezer" }]])).map((d) => d.id), ["d", "b"]);
  assert.deepEqual(onSameCircuit([{ id: "x" }, { id: "y" }], { id: "x" }), []);
});

test("a defect opened by hand stands at once; what was said safe before it does not count for it, what is said after it does", () => {
  const id = () => newId(Date.UTC(2026, 11, 1)), device = { id: id(), kind: "receptacle", fields: {} }, photo = "ab".repeat(32);
  const opened = openedFact({ device, typed: { text: " Cover cracked ", severity: "repair", parts: "cover plate, , screws" }, photos: [photo], newId: id });
  assert.deepEqual(opened.body, { device: device.id, text: "Cover cracked", severity: "repair", parts: ["cover plate", "screws"], photos: [photo] });
  const { record, clock } = makeRecord({ ...opened, log: id(), at: Date.UTC(2026, 11, 1), offset: 0, n: 1, installation: id(), person: id() });
  assert.equal(checkRecord(record), null);
  const safe = { ...saidFact("defect.made_safe", device, "taped off", id), clock };
  const first = openDefects(withFacts({ devices: [device] }, [safe, { ...opened, clock }], new Map()).devices[0]);
  assert.deepEqual(first.map((d) => [d.text, d.severity, d.safe, d.opened]), [["Cover cracked", "repair", undefined, Date.UTC(2026, 11, 1)]]);
  const then = openDefects(withFacts({ devices: [device] }, [{ ...opened, clock }, safe], new Map()).devices[0]);
  assert.deepEqual(then.map((d) => d.safe), ["taped off"]);
});
