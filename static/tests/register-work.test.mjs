import test from "node:test";
import assert from "node:assert/strict";
import { addFacts, bindFacts, moveFacts, renameFacts, replaceFacts, swapFacts } from "../register-work.mjs";
import { checkRecord, newId } from "../record.mjs";
import { makeRecord } from "../making.mjs";
import { withFacts } from "../own-facts.mjs";

const id = () => newId(Date.UTC(2026, 11, 1));
const [p1, p2, a, b, item] = [id(), id(), id(), id(), id()];
const places = [{ id: p1, room: "Kitchen", name: "Left" }, { id: p2, room: "Hall", name: "Door" }];
const A = { id: a, place: p1, kind: "gfci-receptacle", tag: "K7QM2P3", fields: { place: p1, rating_a: 15, make: "Old" } };
const B = { id: b, place: p2, kind: "gfci-receptacle", tag: "7777776", fields: { place: p2 } };
const cord = { id: item, kind: "cord-set", tag: "123456J", fields: {} };
const snapshot = { places, devices: [A, B, cord] };
const after = (facts) => withFacts(snapshot, facts.map((f) => ({ ...f, clock: "0000000000000001" })), new Map(places.map((p) => [p.id, p]))).devices;
const labels = (devices) => Object.fromEntries(devices.map((d) => [d.id, d.tag]));

test("register work: a label moves to another outlet, or two change places", () => {
  assert.deepEqual(labels(after(bindFacts(A, "7777776", B))), { [a]: "7777776", [b]: undefined, [item]: "123456J" });
  assert.deepEqual(labels(after(swapFacts(A, B))), { [a]: "7777776", [b]: "K7QM2P3", [item]: "123456J" });
  assert.deepEqual(labels(after(bindFacts(cord, "K7QM2P3", A))), { [a]: undefined, [b]: "7777776", [item]: "K7QM2P3" });
});

test("register work: a device added in a spot that is known makes no second spot", () => {
  const typed = { place: { room: "kitchen", name: " Left " }, device: { kind: "receptacle", make: "" }, tag: "K7QM2P3" };
  const { facts } = addFacts({ typed, places, newId: id });
  assert.deepEqual(facts.map((f) => f.kind), ["device.registered", "tag.bound"]);
  assert.deepEqual([facts[0].body.set, facts[1].subject], [{ kind: "receptacle", place: p1 }, p1]);
  assert.deepEqual(addFacts({ typed: { ...typed, place: { room: "Attic", name: "Fan" } }, places, newId: id }).facts.map((f) => f.kind), ["place.registered", "device.registered", "tag.bound"]);
});

test("register work: moved, renamed, or neither", () => {
  assert.equal(moveFacts({ device: A, typed: { room: "Kitchen", name: "Left" }, places, newId: id }), null);
  assert.deepEqual(moveFacts({ device: A, typed: { room: "Hall", name: "Door" }, places, newId: id })[0].body.set, { place: p2 });
  assert.equal(renameFacts(places[0], { room: "Kitchen", name: "Left" }), null);
  assert.deepEqual(renameFacts(places[0], { room: "Kitchen", name: "Left of the sink" })[0].body.set, { name: "Left of the sink" });
});

test("register work: the one in its place takes over spot, circuit and rating, not make and age", () => {
  const { facts, device } = replaceFacts({ device: A, typed: { make: "New", serial: "" }, reason: "failed", on: "2026-12-01", newId: id });
  assert.deepEqual(facts[0].body.set, { place: p1, rating_a: 15, kind: "gfci-receptacle", installed: "2026-12-01", make: "New" });
  const list = after(facts);
  assert.deepEqual([list[0].id, list[0].tag], [device, "K7QM2P3"]);
  assert.equal(replaceFacts({ device: cord, typed: {}, reason: "failed", on: "2026-12-01", newId: id }).facts.at(-1).body.tag, "123456J");
});

// DEVELOPERS.md, Kinds and bodies: what a store takes.
test("register work: every record holds against the rules of its kind", () => {
  const all = [addFacts({ typed: { place: { name: "Fan" }, device: { kind: "receptacle" }, tag: "K7QM2P3" }, places, newId: id }).facts, bindFacts(A, "7777776", B),
    renameFacts(places[0], { name: "X" }), moveFacts({ device: A, typed: { name: "Y" }, places, newId: id }),
    replaceFacts({ device: cord, typed: {}, reason: "failed", on: "2026-12-01", newId: id }).facts].flat();
  all.forEach((f, i) => {
    const { record } = makeRecord({ ...f, log: id(), at: Date.UTC(2026, 11, 1), offset: 0, n: i + 1, installation: id(), person: id() });
    const wrong = checkRecord(record);
    assert.ok(wrong === null, `${f.kind}: ${JSON.stringify(wrong)}`);
  });
});
