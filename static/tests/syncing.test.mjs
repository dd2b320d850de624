import test from "node:test";
import assert from "node:assert/strict";
import { syncing } from "../syncing.mjs";
import { isOver } from "../db.mjs";
import { saidAgain, trayFile } from "../rescue.mjs";

const NOW = Date.parse("2026-12-01T12:00:00Z");

/** A phone in memory against a scripted server. */
function phone(net, records = []) {
  const me = {}, dropped = [], covered = [], marked = [];
  const state = { me: {}, sites: new Map(), records, offset: 0 };
  const tray = { setMe: async (k, v) => { me[k] = v; }, waiting: async () => records.filter((r) => r.state === "waiting"), records: async () => records.filter((r) => r.state !== "kept"),
    settle: async (receipts) => receipts.forEach((receipt) => Object.assign(records.find((r) => r.id === receipt.id), { state: "sent", receipt })), refuse: async () => {}, forget: async () => {}, waitingPhotos: async () => [], refusedPhotos: async () => [], resendPhotos: async () => 0, forgetPhotos: async () => {}, sawClock: async () => {},
    forgetSealed: async (ids) => { const gone = records.filter((r) => ids.includes(r.id) && ["sent", "kept"].includes(r.state)); for (const r of gone) records.splice(records.indexOf(r), 1); return gone.length; },
    resend: async (lost) => { const rows = records.filter((r) => ["sent", "kept"].includes(r.state) && lost(r)); for (const r of rows) r.state = "waiting"; return rows.length; },
    become: async (person, name) => { Object.assign(me, { person, name }); }, renew: async (to) => { Object.assign(me, to); },
    cover: async (ids) => ids.forEach((i) => { covered.push(i); records.find((r) => r.id === i).state = "kept"; }) };
  const along = { put: async () => {}, mark: async (row) => { marked.push(row.log); }, drop: async (log) => { dropped.push(log); } };
  let n = 0;
  return { me, state, dropped, covered, marked, ...syncing({ state, tray, along, net, now: () => NOW, newId: () => `installation-${++n}`, changed: () => {} }) };
}
const ok = (body) => ({ ok: true, status: 200, body, offset: 0 });
const not = (status) => ({ ok: false, status, body: null, offset: 0 });
const logs = [{ log: "org" }, { log: "s1", code: "NORTH", name: "North" }];
const server = (more = {}) => ({ enrol: async () => ok({ token: "good", person: { id: "p", name: "Crew 1" }, logs }), logs: async (t) => (t === "good" ? ok({ logs }) : not(401)), snapshot: async () => ok({ site: { id: "s1" } }),
  push: async (t, body) => (t === "good" ? ok({ receipts: JSON.parse(body).records.map((r) => ({ id: r.record, state: "stored" })) }) : not(401)),
  ask: async () => ok({ receipts: [] }), ...more });

test("sync: enrols once, takes its sites along, keeps its installation", async () => {
  const p = phone(server());
  assert.equal((await p.run()).state, "empty");
  assert.equal(p.me.token, "good");
  assert.deepEqual([...p.state.sites.keys()], ["s1"]);
  await p.run();
  assert.equal(p.me.installation, "installation-1");
});

test("sync: a token that ended is renewed by the session, and what waited goes", async () => {
  const p = phone(server(), [{ id: "r1", record: "r1", log: "s1", state: "waiting" }]);
  Object.assign(p.state.me, { installation: "i", token: "old" });
  assert.equal((await p.run()).state, "empty");
  assert.deepEqual(p.covered, ["r1"], "the copy asked for afterwards holds it");
});

const copy = (more = {}) => ({ log: "s1", taken: NOW - 60_000, whole: NOW - 60_000, size: 5, org_size: 3, cursor: "c5", org_cursor: "o3", snapshot: { today: "2026-12-01", site: { zone: "UTC" } }, ...more });
const sized = (size, org = 3, more = {}) => async () => ok({ logs: [{ log: "org", size: org }, { ...logs[1], size }], store: "S", epoch: 1, ...more });
const page = (records, more = {}) => async () => ok({ records: records.map((r) => ({ record: JSON.stringify(r) })), next: "c9", more: false, ...more });

test("taking: nothing new in the log means neither a pull nor another copy", async () => {
  const p = phone(server({ logs: sized(5), pull: () => assert.fail("pulled"), snapshot: () => assert.fail("taken again") }));
  p.state.sites.set("s1", copy());
  assert.equal((await p.run()).state, "empty");
  assert.deepEqual([p.marked, p.state.sites.get("s1").taken], [["s1"], NOW]);
});

test("taking: own records alone move the cursor on; they stay laid over the copy", async () => {
  const p = phone(server({ logs: sized(6), pull: page([{ id: "r1", clock: "0000000000000007" }]), snapshot: () => assert.fail("taken again") }), [{ id: "r1", record: "r1", log: "s1", state: "sent", receipt: {} }]);
  p.state.sites.set("s1", copy());
  await p.run();
  assert.equal(p.state.sites.get("s1").cursor, "c9");
  assert.equal(p.state.records[0].state, "sent");
});

test("taking: anybody else's record, a full page, another day or a new rule takes the copy again", async () => {
  const strange = page([{ id: "x", clock: "0000000000000007" }]);
  for (const [what, net, row] of [
    ["another's", { logs: sized(6), pull: strange }, copy()], ["a full page", { logs: sized(600), pull: page([], { more: true }) }, copy()],
    ["another day", { logs: sized(5), pull: page([]) }, copy({ snapshot: { today: "2026-11-30", site: { zone: "UTC" } } })],
    ["a new rule", { logs: sized(5, 4), pull: page([{ id: "y", kind: "limits.set", clock: "0000000000000007" }]) }, copy()],
  ]) {
    let taken = 0;
    const p = phone(server({ ...net, snapshot: async () => { taken++; return ok({ cursor: "new", clock: "0000000000000009" }); } }));
    p.state.sites.set("s1", row);
    await p.run();
    assert.deepEqual([what, taken, p.state.sites.get("s1").cursor], [what, 1, "new"]);
  }
});

test("taking: who came newly to the people of the organisation changes no copy", async () => {
  const p = phone(server({ logs: sized(5, 4), pull: page([{ id: "y", kind: "person.set", clock: "0000000000000007" }]), snapshot: () => assert.fail("taken again") }));
  p.state.sites.set("s1", copy());
  await p.run();
  assert.equal(p.state.sites.get("s1").org_cursor, "c9");
});

test("taking: a log no longer ours loses its copy, never what waits or was sent", async () => {
  const p = phone(server({ logs: sized(6), pull: async () => ok({ records: [], not_yours: true }) }), [{ id: "r1", record: "r1", log: "s1", state: "refused" }]);
  p.state.sites.set("s1", copy());
  await p.run();
  assert.deepEqual([p.dropped, p.state.records[0].state], [["s1"], "refused"]);
});

test("taking: what the server dropped for good is dropped here too, and never sent again by a restore; what waits is not touched", async () => {
  const at = { store: "S", epoch: 1, pos: 2 };
  const p = phone(server({ logs: sized(5, 3, { epoch: 2, sealed: ["r1", "r2", "r3"] }), snapshot: async () => ok({ cursor: "n" }), push: () => assert.fail("sent again") }),
    [{ id: "r1", record: "r1", log: "s1", state: "kept", receipt: at }, { id: "r2", record: "r2", log: "s1", state: "sent", receipt: at }, { id: "r3", record: "r3", log: "s1", state: "refused" }]);
  p.state.sites.set("s1", copy());
  p.state.me.server = "S 1";
  await p.run();
  assert.deepEqual(p.state.records.map((r) => [r.id, r.state]), [["r3", "refused"]]);
});

test("taking: a restored server gets again what this phone keeps: another epoch, a shorter log, a cursor it never gave", async () => {
  for (const [what, net, receipt] of [
    ["another epoch", { logs: sized(5, 3, { epoch: 2 }), snapshot: async () => ok({ cursor: "n" }) }, { store: "S", epoch: 1, pos: 2 }],
    ["a shorter log", { logs: sized(5), snapshot: async () => ok({ cursor: "n" }) }, { store: "S", epoch: 1, pos: 6 }],
    ["an unknown cursor", { logs: sized(9), pull: async () => ok({ records: [], snapshot: true }), snapshot: async () => ok({ cursor: "n" }) }, { store: "S", epoch: 1, pos: 2 }],
  ]) {
    const got = [];
    const p = phone(server({ ...net, push: async (t, body) => { const sent = JSON.parse(body).records.map((r) => r.record); got.push(...sent); return ok({ receipts: sent.map((id) => ({ id, state: "stored", store: "S", epoch: 2, pos: 1 })) }); } }),
      [{ id: "r1", record: "r1", log: "s1", state: "kept", receipt }]);
    p.state.sites.set("s1", copy());
    Object.assign(p.state.me, { server: "S 1", backed_up: { s1: 9 } });
    await p.run();
    assert.deepEqual([what, got, p.state.records.map((r) => r.state)], [what, ["r1"], ["sent"]]);
    assert.deepEqual(p.state.me.backed_up, what === "another epoch" ? {} : { s1: 9 }, what);
    if (what === "an unknown cursor") assert.equal(p.state.sites.get("s1").cursor, "n");
  }
});

test("taking: many sites are taken only when chosen; one left behind is dropped, and comes when chosen again", async () => {
  const many = Array.from({ length: 9 }, (_, i) => ({ log: `s${i}`, code: `C${i}`, name: `${i}`, size: 1 }));
  const p = phone(server({ enrol: async () => ok({ token: "good", person: { id: "p" }, logs: many }), logs: async () => ok({ logs: many }) }));
  await p.run();
  assert.equal(p.state.sites.size, 0);
  await p.choose("s3", true);
  await p.run();
  assert.deepEqual([...p.state.sites.keys()], ["s3"]);
  await p.choose("s3", false);
  await p.run();
  assert.equal(p.state.sites.size, 0);
});

test("sync: a copied phone takes a new id; what was made under the old one goes with the old token", async () => {
  const pushed = [];
  const records = ["a", "a", "b"].map((from, i) => ({ id: `r${i}`, record: `r${i}`, from, log: "s1", state: "waiting" }));
  const p = phone(server({ push: async (t, body) => { const sent = JSON.parse(body).records.map((r) => r.record); pushed.push([t, ...sent]); return ok({ receipts: sent.map((id) => ({ id, state: "stored", reused: id === "r2" })) }); },
    logs: async () => ok({ logs }), renew: async (t, installation) => ok({ token: `token of ${installation}` }) }), records);
  Object.assign(p.state.me, { installation: "b", token: "good", former: { a: "token of a" } });
  await p.run();
  assert.deepEqual(pushed, [["token of a", "r0", "r1"], ["good", "r2"]]);
  assert.deepEqual([p.state.me.installation, p.state.me.token, p.state.me.former], ["installation-1", "token of installation-1", { a: "token of a", b: "good" }]);
});

test("sync: somebody else who signed in takes over; the installation stays", async () => {
  let who = "p";
  const p = phone(server({ enrol: async () => ok({ token: "good", person: { id: who, name: who }, logs }) }));
  await p.run();
  who = "q";
  assert.equal(await p.takeOver(), true);
  assert.equal(p.me.person, "q");
  assert.equal(p.me.installation, "installation-1");
});

test("sync: signed out for good keeps everything and says so", async () => {
  const p = phone(server({ enrol: async () => not(401), push: async () => not(401) }), [{ id: "r1", record: "r1", log: "s1", state: "waiting" }]);
  Object.assign(p.state.me, { installation: "i", token: "old" });
  assert.equal((await p.run()).state, "signed-out");
  assert.equal(p.state.records[0].state, "waiting");
  assert.equal(p.state.me.token, "old", "the token is not thrown away either");
});

test("sync: a site that is no longer ours loses its copy, never what waits", async () => {
  const p = phone(server({ logs: async () => ok({ logs: [{ log: "org" }] }), push: async () => not(503) }), [{ id: "r1", record: "r1", log: "s1", state: "waiting" }]);
  p.state.sites.set("s1", { log: "s1", taken: 0 });
  assert.equal((await p.run()).state, "trouble");
  assert.deepEqual(p.dropped, ["s1"]);
  assert.equal(p.state.records[0].state, "waiting");
});

test("sync: one site the server cannot give just now does not keep the others away", async () => {
  const two = [...logs, { log: "s2", code: "SOUTH", name: "South" }];
  const p = phone(server({ logs: async () => ok({ logs: two }), snapshot: async (t, log) => (log === "s1" ? { ...not(500), body: { error: { text: "Something went wrong here. Reference 7." } } } : ok({})) }));
  assert.equal((await p.run()).state, "trouble");
  assert.deepEqual([...p.state.sites.keys()], ["s2"]);
  assert.equal(p.state.said, "Something went wrong here. Reference 7.");
});

test("tray: an acknowledged record goes after two weeks where a backup covers it, after half a year in any case", () => {
  const day = 86_400_000, row = (days, pos) => ({ sent_at: NOW - days * day, log: "s1", receipt: { pos } });
  for (const [days, pos, over] of [[13, 1, false], [15, 7, true], [15, 8, false], [179, 8, false], [181, 8, true], [15, undefined, false]]) assert.equal(isOver(row(days, pos), NOW, { s1: 7 }), over, `${days} days, place ${pos}`);
  assert.equal(isOver(row(15, 1), NOW, {}), false);
});

test("sync: a refused record a manager let in is counted as sent; one whose id another record took stays refused", async () => {
  const asked = [];
  const p = phone(server({ ask: async (t, ids) => { asked.push(...ids); return ok({ receipts: ids.map((id) => ({ id, state: "stored", pos: 9 })) }); } }),
    [{ id: "r1", record: "r1", log: "s1", state: "refused", receipt: { state: "refused", code: "not_permitted" } }, { id: "r2", record: "r2", log: "s1", state: "refused", receipt: { state: "refused", code: "id_reused" } }]);
  await p.run();
  assert.deepEqual(asked, ["r1"]);
  assert.deepEqual(p.state.records.map((r) => r.state), ["sent", "refused"]);
});

test("rescue: the file carries each record as the exact string it is", () => {
  const record = '{"id":"a","body":{"typed":"4,50 \u03a9 <&>","value":4.50}}';
  const photos = [{ sha256: "aa", entry: "a", base64: "AAEC" }, { sha256: "bb", entry: "a", base64: "" }];
  const file = JSON.parse(trayFile([{ record, state: "waiting" }], { installation: "i", name: "Crew 1" }, NOW, photos).join(""));
  assert.deepEqual(file, { tripwell: "tray", v: 1, installation: "i", person: "Crew 1", made: "2026-12-01T12:00:00.000Z", records: [{ record, state: "waiting" }], photos });
  assert.deepEqual(JSON.parse(trayFile([], {}, NOW).join("")).photos, []);
});

test("rescue: a refused record made again says the same at the same time", () => {
  const said = saidAgain({ record: JSON.stringify({ id: "a", kind: "entry.made", log: "s", subject: "d", at: "2026-12-01T09:00:00.000+01:00", n: 4, body: { form: "f" } }) });
  assert.deepEqual(said, { kind: "entry.made", log: "s", subject: "d", at: Date.parse("2026-12-01T08:00:00Z"), body: { form: "f" } });
});
