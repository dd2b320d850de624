import assert from "node:assert/strict";
import { test } from "node:test";
import { onSameCircuit, openDefects, saidFact } from "../defect-work.mjs";
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
  assert.deepEqual(onSameCircuit([{ id: "x" }, { id: "y" }], { id: "x" }), []);
});
