import test from "node:test";
import assert from "node:assert/strict";
import { drain, nextBatch, pause, pushBody } from "../tray.mjs";
import { sending } from "../sending.mjs";
import { clockOffset, exchange } from "../exchange.mjs";

/** A tray in memory and a server that keeps what it decided; `faults` are taken one for each push. */
function rig(count, { faults = [], refuse = new Set(), most = Infinity, receipts } = {}) {
  const rows = Array.from({ length: count }, (_, i) => ({ id: `id-${i}`, record: `{"id":"id-${i}"}`, state: "waiting" }));
  const server = new Map();
  const pushes = [];
  const storage = {
    waiting: async () => rows.filter((r) => r.state === "waiting"),
    settle: async (receipts) => receipts.forEach((receipt) => Object.assign(rows.find((r) => r.id === receipt.id), { state: "sent", receipt })),
    refuse: async (id, receipt) => Object.assign(rows.find((r) => r.id === id), { state: "refused", receipt }),
  };
  const send = async (text) => {
    const body = JSON.parse(text);
    const fault = faults.shift();
    pushes.push(body.records.length);
    if (fault === "cut") return { ok: false, status: 0 };
    if (typeof fault === "number") return { ok: false, status: fault, retryAfter: 7 };
    if (body.records.length > most) return { ok: false, status: 413 };
    const answers = body.records.map(({ record }) => {
      const { id } = JSON.parse(record);
      if (refuse.has(id)) return { id, state: "refused", code: "bad_body", text: "The form is not known here." };
      const state = server.has(id) ? "already" : "stored";
      server.set(id, record);
      return { id, state };
    });
    if (fault === "answer lost") return { ok: false, status: 0 };
    return { ok: true, status: 200, body: { receipts: receipts ? receipts(answers) : answers } };
  };
  return { rows, server, pushes, go: () => drain({ storage, send, sentAt: () => "2026-12-01T08:00:00.000Z" }) };
}
const states = (rows) => rows.map((r) => r.state);

test("tray: everything stored leaves", async () => {
  const r = rig(3);
  assert.deepEqual(await r.go(), { state: "empty", sent: 3, refused: 0, retryAfter: 0 });
  assert.deepEqual(states(r.rows), ["sent", "sent", "sent"]);
});

test("tray: a lost answer leaves all in the tray; the next try is answered already, and the server has each once", async () => {
  const r = rig(3, { faults: ["answer lost"] });
  assert.equal((await r.go()).state, "unreached");
  assert.deepEqual(states(r.rows), ["waiting", "waiting", "waiting"]);
  assert.equal(r.server.size, 3);
  assert.equal((await r.go()).state, "empty");
  assert.deepEqual(r.rows.map((x) => x.receipt.state), ["already", "already", "already"]);
  assert.equal(r.server.size, 3);
});

test("tray: one refused record stays with its sentence and does not hold up the others", async () => {
  const r = rig(4, { refuse: new Set(["id-1"]) });
  assert.deepEqual(await r.go(), { state: "empty", sent: 3, refused: 1, retryAfter: 0 });
  assert.deepEqual(states(r.rows), ["sent", "refused", "sent", "sent"]);
  assert.equal(r.rows[1].receipt.text, "The form is not known here.");
});

test("tray: a refusal without an id is that of the record in its place; without one for each, nobody's", async () => {
  const nameless = (answers) => answers.map((a, i) => (i === 1 ? { id: "", state: "refused", code: "malformed", text: "This is no record." } : a));
  const r = rig(3, { receipts: nameless });
  assert.deepEqual(await r.go(), { state: "empty", sent: 2, refused: 1, retryAfter: 0 });
  assert.deepEqual(states(r.rows), ["sent", "refused", "sent"]);
  const short = rig(3, { receipts: (answers) => nameless(answers).slice(1, 2) });
  assert.equal((await short.go()).state, "trouble");
  assert.deepEqual(states(short.rows), ["waiting", "waiting", "waiting"]);
});

test("tray: 401 drops nothing", async () => {
  const r = rig(2, { faults: [401] });
  assert.equal((await r.go()).state, "signed-out");
  assert.deepEqual(states(r.rows), ["waiting", "waiting"]);
});

test("tray: 429 and 5xx drop nothing and keep the server's wish", async () => {
  for (const [status, state] of [[429, "busy"], [500, "trouble"], [503, "trouble"], [403, "trouble"], [400, "trouble"]]) {
    const r = rig(1, { faults: [status] });
    const done = await r.go();
    assert.equal(done.state, state);
    assert.equal(done.retryAfter, 7);
    assert.deepEqual(states(r.rows), ["waiting"]);
  }
});

test("tray: 413 halves the batch until it fits", async () => {
  const r = rig(10, { most: 3 });
  assert.equal((await r.go()).state, "empty");
  assert.deepEqual(r.pushes, [10, 5, 2, 2, 2, 2, 2]);
  assert.equal(r.server.size, 10);
});

test("tray: a single record the server finds too large is set apart, the rest goes", async () => {
  const rows = rig(2, { faults: [413, 413] });
  assert.deepEqual(await rows.go(), { state: "empty", sent: 1, refused: 1, retryAfter: 0 });
  assert.equal(rows.rows[0].receipt.code, "too_large");
});

test("tray: a receipt with another id, an unknown state or none at all lets nothing go", async () => {
  for (const receipts of [() => [{ id: "somebody-else", state: "stored" }], (a) => a.map((x) => ({ ...x, state: "perhaps" })), () => undefined, () => []]) {
    const r = rig(2, { receipts });
    assert.equal((await r.go()).state, "trouble");
    assert.deepEqual(states(r.rows), ["waiting", "waiting"]);
  }
});

test("tray: a half-answered batch keeps the other half", async () => {
  const r = rig(2, { receipts: (a) => a.slice(0, 1), faults: [undefined, "cut"] });
  assert.equal((await r.go()).state, "unreached");
  assert.deepEqual(states(r.rows), ["sent", "waiting"]);
});

test("tray: a batch holds at most 500 records and 512 KiB", () => {
  const rows = (n, size) => Array.from({ length: n }, (_, i) => ({ id: `${i}`, record: "x".repeat(size) }));
  assert.equal(nextBatch(rows(1200, 10)).length, 500);
  const batch = nextBatch(rows(100, 60_000));
  assert.ok(pushBody(batch, "2026-12-01T08:00:00.000Z").length <= 512 * 1024);
  assert.equal(nextBatch(rows(3, 600_000)).length, 1, "one too large for any push still goes alone");
});

test("tray: a record travels as the exact string that was kept", () => {
  const record = '{"id":"a","body":{"typed":"4,50 \u03a9 <&>"}}';
  assert.equal(JSON.parse(pushBody([{ id: "a", record }], "t")).records[0].record, record);
});

test("pause: doubles with jitter, at most five minutes, never less than the server asked", () => {
  assert.ok(pause(0, () => 0) >= 1000 && pause(0, () => 1) <= 2000);
  assert.ok(pause(3, () => 0) > pause(1, () => 1));
  assert.ok(pause(50, () => 1) <= 300_000);
  assert.equal(pause(0, () => 0, 30), 30_000);
});

test("sending: never twice at once; a kick while running runs again after; failures wait longer", async () => {
  const waits = [];
  let running = 0, runs = 0, release;
  const answers = ["unreached", "unreached", "empty"];
  const s = sending({
    run: async () => { runs++; running++; assert.equal(running, 1); await new Promise((r) => { release = r; }); running--; return { state: answers.shift() ?? "empty" }; },
    later: (fn, ms) => { waits.push({ fn, ms }); return waits.length; }, cancel: () => {}, random: () => 1,
  });
  const tick = () => new Promise((r) => setImmediate(r));
  s.kick(); s.kick();
  await tick(); release(); await tick(); release(); await tick();
  assert.equal(runs, 2);
  assert.equal(waits.length, 1);
  const first = waits[0].ms;
  waits[0].fn(); await tick(); release(); await tick();
  assert.equal(runs, 3);
  assert.ok(waits[1].ms > first, "after an empty tray the next look is the slow one");
  s.stop();
});

test("exchange: a page in between, a cut answer and no line are no answer", async () => {
  const headers = { get: () => null };
  for (const fetch of [async () => { throw new TypeError("no line"); }, async () => ({ ok: true, status: 200, headers, json: async () => JSON.parse("<html>") })]) {
    const answer = await exchange({ fetch, now: () => 0 }).push("t", "{}");
    assert.equal(answer.ok, false);
    assert.equal(answer.status, 0);
  }
});

test("exchange: the server's clock is measured at the middle of the round trip", () => {
  assert.equal(clockOffset("Tue, 01 Dec 2026 08:00:10 GMT", Date.parse("2026-12-01T08:00:00Z"), Date.parse("2026-12-01T08:00:01Z")), 10_000);
  assert.equal(clockOffset(null, 0, 0), null);
});
