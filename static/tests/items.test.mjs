import test from "node:test";
import assert from "node:assert/strict";
import { itemsHere, siteOf, travels, whereFacts } from "../items.mjs";
import { openSite } from "../site-view.mjs";
import { checkRecord, newId } from "../record.mjs";
import { makeRecord } from "../making.mjs";

const id = () => newId(Date.UTC(2026, 11, 1));
const [depot, host, item, cord, wall, spot] = [id(), id(), id(), id(), id(), id()];
const snapshot = (log, devices) => ({ log, taken: 0, snapshot: { site: { code: "X", zone: "UTC" }, places: [{ id: spot, name: "Wall" }], devices, forms: [], limit_sets: [] } });
const drill = { id: item, kind: "portable-gfci", fields: { where: "Crib" }, seen: "0000000000000007" };

test("items: what travels has no place of its own", () => {
  assert.equal(travels(drill), true);
  assert.equal(travels({ ...drill, place: spot }), false);
  assert.equal(travels({ id: wall, kind: "gfci-receptacle" }), false);
});

test("items: brought here states only what changed, in the depot's log; brought home clears the site", () => {
  const [fact] = whereFacts({ depot, device: drill, at: host, where: "" });
  assert.deepEqual(fact, { kind: "device.set", subject: item, body: { set: { at_site: host, where: null }, seen: drill.seen } });
  assert.equal(whereFacts({ depot, device: drill, at: depot }), null);
  const away = { ...drill, fields: { at_site: host, where: "Van" } };
  assert.deepEqual(whereFacts({ depot, device: away, at: depot, where: "Van" })[0].body.set, { at_site: null });
  assert.equal(siteOf(depot, away), host);
  assert.equal(siteOf(depot, drill), depot);
  const { record } = makeRecord({ ...fact, log: depot, at: Date.UTC(2026, 11, 1), offset: 0, n: 1, installation: id(), person: id() });
  assert.equal(checkRecord(record), null);
});

test("items: a site lists what is there from other depots, and a tap of this phone counts at once", () => {
  const fact = whereFacts({ depot, device: drill, at: host, where: "" })[0];
  const rows = [{ log: depot, fact, clock: "0000000000000009", saved: 1, n: 1, state: "waiting" }];
  const at = (records) => [openSite(snapshot(depot, [drill, { id: cord, kind: "cord-set", fields: {} }]), records, "2026-12-01"), openSite(snapshot(host, []), records, "2026-12-01")];
  assert.deepEqual(itemsHere(at([]), host).length, 0);
  const found = itemsHere(at(rows), host);
  assert.deepEqual(found.map((f) => [f.site.log, f.device.id, f.device.fields.where]), [[depot, item, undefined]]);
  assert.equal(itemsHere(at(rows), depot).length, 0);
});
