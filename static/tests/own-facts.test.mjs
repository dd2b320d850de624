import test from "node:test";
import assert from "node:assert/strict";
import { factsOf, withFacts } from "../own-facts.mjs";
import { changedFields } from "../register-fields.mjs";

const snapshot = {
  places: [{ id: "p1", room: "Kitchen", name: "Left" }, { id: "p2", room: "Hall", name: "Door" }],
  devices: [
    { id: "a", kind: "gfci-receptacle", place: "p1", tag: "AAAAAA1", panel: "LP-2", circuit: "14", fields: { circuit: "c1", place: "p1" }, due: [{ task: "button" }] },
    { id: "b", kind: "receptacle", place: "p2", tag: "BBBBBB2", fields: { place: "p2" } },
  ],
};
const places = new Map(snapshot.places.map((p) => [p.id, p]));
const read = (...facts) => withFacts(snapshot, facts, places);
const fact = (kind, subject, body) => ({ kind, subject, body, clock: "0000000000000001" });

test("own facts: nothing written gives the copy back as it is", () => {
  assert.equal(read().devices, snapshot.devices);
});

test("own facts: a device added stands at the end of its room, on its circuit, with its label", () => {
  const site = read(fact("place.registered", "p3", { set: { room: "Kitchen", name: "Right" } }),
    fact("device.registered", "c", { set: { kind: "gfci-receptacle", place: "p3", circuit: "c1" } }), fact("tag.bound", "p3", { tag: "CCCCCC3" }));
  assert.deepEqual(site.devices.map((d) => d.id), ["a", "c", "b"]);
  assert.deepEqual([site.devices[1].tag, site.devices[1].panel, site.devices[1].circuit, site.places.get("p3").name], ["CCCCCC3", "LP-2", "14", "Right"]);
  assert.equal(snapshot.devices.length, 2, "the copy is not changed");
});

test("own facts: two labels swapped change places, a freed one names nothing", () => {
  const site = read(fact("tag.freed", "p1", { tag: "AAAAAA1" }), fact("tag.freed", "p2", { tag: "BBBBBB2" }), fact("tag.bound", "p1", { tag: "BBBBBB2" }), fact("tag.bound", "p2", { tag: "AAAAAA1" }));
  assert.deepEqual(site.devices.map((d) => d.tag), ["BBBBBB2", "AAAAAA1"]);
  assert.equal(read(fact("tag.freed", "p1", { tag: "AAAAAA1" })).devices[0].tag, undefined);
  assert.equal(read(fact("tag.freed", "p1", { tag: "OTHER00" })).devices[0].tag, "AAAAAA1");
});

test("own facts: a replaced device hands its label and its dates to the new one and is gone", () => {
  const site = read(fact("device.registered", "n", { set: { kind: "gfci-receptacle", place: "p1" } }), fact("device.replaced", "a", { with: "n" }));
  assert.deepEqual(site.devices.map((d) => [d.id, d.tag, d.due?.length]), [["n", "AAAAAA1", 1], ["b", "BBBBBB2", undefined]]);
});

test("own facts: a device moved is walked in its new room and leaves its label where it hangs", () => {
  const site = read(fact("place.registered", "p9", { set: { room: "Hall", name: "Stairs" } }), fact("device.set", "a", { set: { place: "p9" } }));
  assert.deepEqual(site.devices.map((d) => [d.id, d.tag]), [["b", "BBBBBB2"], ["a", undefined]]);
});

test("own facts: refused and covered ones count no more, the others in the order they were made", () => {
  const row = (n, state) => ({ saved: 5, n, state, clock: "x", fact: { kind: "tag.bound", subject: `s${n}`, body: {} } });
  assert.deepEqual(factsOf([row(3, "waiting"), row(1, "sent"), row(2, "kept"), row(4, "refused")]).map((f) => f.subject), ["s1", "s3"]);
});

test("fields: only what differs is stated, an emptied text clears", () => {
  assert.deepEqual(changedFields({ name: "Left", room: "Kitchen" }, { name: "Left ", room: "", floor: "Ground" }), { room: null, floor: "Ground" });
  assert.equal(changedFields({ name: "Left" }, { name: "Left" }), null);
});
