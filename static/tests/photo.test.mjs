import test from "node:test";
import assert from "node:assert/strict";
import { drainPhotos } from "../photo-queue.mjs";
import { fitted, sha256Of } from "../photo.mjs";

test("photo: fits into 1600 pixels and is never enlarged", () => {
  assert.deepEqual(fitted(4000, 3000), { width: 1600, height: 1200 });
  assert.deepEqual(fitted(3000, 4000), { width: 1200, height: 1600 });
  assert.deepEqual(fitted(640, 480), { width: 640, height: 480 });
});

// FIPS 180-4, example "abc".
test("photo: is named by its SHA-256", async () => {
  assert.equal(await sha256Of(new TextEncoder().encode("abc")), "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad");
});

const queue = (answers) => {
  const rows = Object.keys(answers).map((sha256) => ({ sha256 })), settled = [], refused = [];
  return { settled, refused, run: () => drainPhotos({ storage: { waitingPhotos: async () => rows, settlePhoto: async (s) => settled.push(s), refusePhoto: async (s, text) => refused.push([s, text]) }, send: async (row) => answers[row.sha256] }) };
};

test("photo queue: lets go only on an answer that names the photo; a refused one does not hold up the next", async () => {
  const q = queue({ a: { ok: true, status: 200, body: { sha256: "a" } }, b: { ok: false, status: 413, body: { error: { text: "Too large." } } }, c: { ok: true, status: 200, body: { sha256: "c" } } });
  assert.deepEqual(await q.run(), { state: "empty", sent: 2 });
  assert.deepEqual([q.settled, q.refused], [["a", "c"], [["b", "Too large."]]]);
  for (const [answer, state] of [[{ ok: true, status: 200, body: { sha256: "x" } }, "trouble"], [{ ok: false, status: 0 }, "unreached"], [{ ok: false, status: 401 }, "signed-out"], [{ ok: false, status: 429 }, "busy"], [{ ok: false, status: 500 }, "trouble"]]) {
    const stuck = queue({ a: answer, b: { ok: true, status: 200, body: { sha256: "b" } } });
    assert.equal((await stuck.run()).state, state);
    assert.deepEqual([stuck.settled, stuck.refused], [[], []]);
  }
});
