import test from "node:test";
import assert from "node:assert/strict";
import { readFileSync } from "node:fs";
import { continues, includes, leafData, leafHash } from "../proof.mjs";
import { doubted, heads } from "../heads.mjs";

const cases = JSON.parse(readFileSync(new URL("../../testdata/proofs.json", import.meta.url)));

test("proof: every case of testdata/proofs.json is answered as in Go", async () => {
  for (const c of cases) {
    const holds = c.from_root ? await continues(c.proof, c.size, c.root, c.from, c.from_root) : await includes(c.proof, c.size, c.root, c.index, c.leaf);
    assert.equal(holds, c.holds, c.name);
  }
});

const CT = (from, size) => cases.find((c) => c.name === `eight leaves consistency ${from} to ${size}`);
const SERVER = { store: "S", epoch: 1 };

/** A phone that holds a head against a server that answers what it is given. */
function phone(me = {}, { answers = [], taken = true, records = [] } = {}) {
  const asked = [], told = [], state = { me, sites: new Map([["s1", {}]]), records };
  let again = 0;
  const book = heads({ state, now: () => 1000, keep: async (name, value) => { state.me[name] = value; },
    tray: { record: async (id) => records.find((r) => r.id === id), resend: async (lost) => { const rows = records.filter(lost); again += rows.length; return rows.length; } },
    withToken: (call) => call("token"),
    net: { head: async (t, log, from, own) => { asked.push([log, from, own]); const body = answers.shift(); return body ? { ok: true, body: { ...SERVER, ...body } } : { ok: false, status: 0 }; },
      tellHead: async (t, head) => { told.push(head); return { ok: taken }; } } });
  const see = (size, more = {}) => book.compare({ ...SERVER, logs: [{ log: "s1", size, root: more.root ?? CT(size, size).root }], ...more });
  return { state, asked, told, see, goOn: book.goOn, again: () => again, head: () => state.me.heads.s1 };
}
const answer = (from, size, more = {}) => ({ size, root: CT(from || size, size).root, proof: from ? CT(from, size).proof : [], ...more });

test("heads: the first head is kept; one that goes on from it takes its place; nothing new asks nothing", async () => {
  const p = phone({}, { answers: [answer(0, 3), answer(3, 7)] });
  await p.see(3);
  await p.see(3);
  await p.see(7);
  assert.deepEqual(p.asked, [["s1", 0, 0], ["s1", 3, 0]]);
  assert.deepEqual([p.head().size, p.head().root, p.told.length, doubted(p.state.me)], [7, CT(7, 7).root, 0, []]);
});

test("heads: a log that does not go on is told to the person and the server, and what is kept goes once more; the head that was known stays", async () => {
  const records = [{ id: "r1", log: "s1", state: "kept", sent_at: 1 }];
  const other = answer(3, 7, { proof: CT(2, 7).proof });
  const p = phone({}, { answers: [answer(0, 3), other, other, answer(3, 7)], records });
  await p.see(3);
  assert.equal(await p.see(7), 1);
  assert.deepEqual(doubted(p.state.me), [{ log: "s1", known: 3, at: 1000, size: 7, told: true }]);
  assert.deepEqual(p.told, [{ log: "s1", size: 3, root: CT(3, 3).root }]);
  assert.equal(await p.see(7), 0, "sent again once only");
  await p.see(7);
  assert.deepEqual([doubted(p.state.me), p.head().size, p.told.length], [[], 7, 2], "found in order again: the server is told that too");
});

test("heads: a shorter log of the same server is in doubt; who cannot be told stays untold until they can", async () => {
  const p = phone({}, { answers: [answer(0, 7), answer(0, 3)], taken: false });
  await p.see(7);
  await p.see(3);
  assert.deepEqual(doubted(p.state.me).map((d) => [d.known, d.size, d.told]), [[7, 3, false]]);
});

test("heads: a restored server is no doubt: its book is known anew from there", async () => {
  const p = phone({}, { answers: [answer(0, 7), { ...answer(0, 3), epoch: 2 }] });
  await p.see(7);
  await p.see(3, { epoch: 2 });
  assert.deepEqual([doubted(p.state.me), p.head().size, p.head().server], [[], 3, "S 2"]);
  assert.deepEqual(p.asked[1], ["s1", 0, 0]);
});

test("heads: an acknowledged record must stand at its place with its bytes", async () => {
  const record = '{"id":"r1"}', stamp = '{"received":"2026-12-01T12:00:00.000Z"}', leaf = await leafHash(leafData(stamp, record));
  for (const [what, own, doubts] of [["as it was made", { pos: 1, stamp, proof: [] }, 0], ["with another stamp", { pos: 1, stamp: "{}", proof: [] }, 1], ["not there", undefined, 1]]) {
    const records = [{ id: "r1", log: "s1", state: "sent", record, sent_at: 5, receipt: { pos: 1, ...SERVER } }];
    const p = phone({}, { answers: [{ size: 1, root: leaf, proof: [], own }], records });
    await p.see(1, { root: leaf });
    assert.deepEqual([what, doubted(p.state.me).length, p.asked[0]], [what, doubts, ["s1", 0, 1]]);
  }
});

test("heads: an older server tells no roots, and one out of reach changes nothing", async () => {
  const p = phone({}, { answers: [] });
  await p.see(3, { root: "" });
  assert.deepEqual([p.asked, p.state.me.heads], [[], {}]);
  await p.see(3);
  assert.deepEqual([p.asked.length, p.state.me.heads], [1, {}]);
});

test("heads: the book as it is now can be taken for known", async () => {
  const other = answer(3, 7, { proof: [] });
  const p = phone({}, { answers: [answer(0, 3), other, answer(0, 7)] });
  await p.see(3);
  await p.see(7);
  await p.goOn("s1");
  await p.see(7);
  assert.deepEqual([doubted(p.state.me), p.head().size], [[], 7]);
});
