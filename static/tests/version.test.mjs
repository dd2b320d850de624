import test from "node:test";
import assert from "node:assert/strict";
import { isCalm, versions } from "../version.mjs";

function rig({ controller = {}, waiting = null } = {}) {
  const on = {}, worker = {}, later = [], kept = new Map(), posted = [], seen = { loads: 0, offered: 0 };
  const registration = { waiting: waiting && { postMessage: (m) => posted.push(m) }, installing: null, addEventListener: (name, fn) => { worker[name] = fn; }, update: async () => {} };
  const container = { controller, addEventListener: (name, fn) => { on[name] = fn; }, register: async () => registration };
  const rig = { on, worker, registration, posted, seen, calm: true, at: 1_000_000, tick: () => later.splice(0).forEach((fn) => fn()) };
  rig.versions = versions({ container, calm: () => rig.calm, offered: () => { seen.offered++; }, load: () => { seen.loads++; }, now: () => rig.at, later: (fn) => later.push(fn),
    session: { getItem: (k) => kept.get(k) ?? null, setItem: (k, v) => kept.set(k, v) } });
  return rig;
}

test("version: a waiting one is offered and taken only while no form is open", async () => {
  const r = rig({ waiting: true });
  await r.versions.start();
  assert.equal(r.seen.offered, 1);
  r.calm = false;
  assert.equal(r.versions.take(), false);
  assert.deepEqual(r.posted, []);
  r.calm = true;
  assert.equal(r.versions.take(), true);
  assert.deepEqual(r.posted, ["take over"]);
  r.on.controllerchange();
  r.on.controllerchange();
  assert.equal(r.seen.loads, 1, "loads once, not in a circle");
});

test("version: asked again until the change is made, never over an open form", async () => {
  const r = rig({ waiting: true });
  await r.versions.start();
  r.versions.take();
  r.tick();
  assert.equal(r.posted.length, 2);
  r.calm = false;
  r.tick();
  assert.equal(r.posted.length, 2, "a form was opened");
  r.calm = true;
  r.versions.calmNow();
  assert.equal(r.posted.length, 3);
  r.registration.waiting = null; // it took over
  r.tick();
  r.tick();
  assert.equal(r.posted.length, 3);
});

test("version: taken by another page while a form is open here, the load waits for the form", async () => {
  const r = rig();
  await r.versions.start();
  r.calm = false;
  r.on.controllerchange();
  assert.equal(r.seen.loads, 0);
  r.calm = true;
  r.versions.calmNow();
  assert.equal(r.seen.loads, 1);
});

test("version: the first worker of all changes nothing on the page", async () => {
  const r = rig({ controller: null });
  await r.versions.start();
  r.on.controllerchange();
  assert.equal(r.seen.loads + r.seen.offered, 0);
});

test("version: every page that is no list is an open form", () => {
  assert.equal(isCalm({ route: { page: "sites" }, saving: false }), true);
  assert.equal(isCalm({ route: { page: "sites" }, saving: true }), false);
  for (const page of ["test", "add", "anything new"]) assert.equal(isCalm({ route: { page }, saving: false }), false);
});
