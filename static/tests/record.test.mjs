// The vectors that store/record runs too: testdata/records.json and testdata/merge.json.
import assert from "node:assert/strict";
import { readFileSync } from "node:fs";
import { test } from "node:test";
import { clockText, mergeClock, nextClock, parseClock } from "../clock.mjs";
import { losers, weigh } from "../merge.mjs";
import { checkRecord, isTime, newId, timeText, writeRecord } from "../record.mjs";
import { checkCharacter, isTag, parseTag, showTag } from "../tag.mjs";

const vectors = (name) => JSON.parse(readFileSync(new URL(`../../testdata/${name}`, import.meta.url), "utf8"));

test("records are taken and refused as the store does", () => {
  for (const { name, line, code, field = "", pad = 0 } of vectors("records.json")) {
    const got = checkRecord(line.replace("PAD", "x".repeat(pad))) ?? { code: "ok", field: "" };
    assert.equal(got.code, code, name);
    if (field) assert.equal(got.field, field, name);
  }
});

test("fields merge as the store merges them, in whatever order they come", () => {
  for (const { name, said, winner, losers: lost } of vectors("merge.json")) {
    const all = said.map((s) => ({ ...s, clock: BigInt("0x" + s.clock), seen: BigInt("0x" + s.seen) }));
    for (let i = 0; i < all.length; i++) {
      const order = weigh([...all.slice(i), ...all.slice(0, i)]);
      assert.equal(order[0].id, winner, name);
      assert.deepEqual(losers(order).map((l) => l.id), lost, name);
    }
  }
});

test("what is written here passes the check", () => {
  const ms = Date.UTC(2026, 11, 1, 8, 30, 0, 5), id = () => newId(ms);
  const line = writeRecord({ id: id(), kind: "entry.made", log: id(), subject: id(), at: timeText(ms), clock: clockText(nextClock(0n, ms)), by: id(), from: id(), n: 1,
    body: { form: "rcd/button", readings: { button_trips: { value: "yes" } }, note: "Küche \ud83d\udd0c" } });
  assert.equal(checkRecord(line), null);
});

test("times carry the offset of the place", () => {
  const ms = Date.UTC(2026, 11, 1, 8, 30, 0, 5);
  assert.equal(timeText(ms, 0), "2026-12-01T08:30:00.005Z");
  assert.equal(timeText(ms, -300), "2026-12-01T03:30:00.005-05:00");
  assert.equal(timeText(ms, 345), "2026-12-01T14:15:00.005+05:45");
  assert.ok(isTime(timeText(ms, -210)));
});

test("the clock goes on from the largest stamp seen", () => {
  assert.equal(nextClock(0n, 5), 5n << 16n);
  assert.equal(nextClock(5n << 16n, 5), (5n << 16n) + 1n);
  assert.equal(nextClock(9n << 16n, 5), (9n << 16n) + 1n);
  assert.equal(mergeClock(3n, 9n), 9n);
  assert.equal(clockText(5n << 16n), "0000000000050000");
  assert.equal(parseClock("0000000000050000"), 5n << 16n);
  assert.equal(parseClock("0000000000000000"), null);
});

test("tags", () => {
  // ISO 7064, MOD 37,36: worked example of the standard.
  assert.equal(checkCharacter("A12425GABC1234002"), "M");
  assert.ok(isTag("K7QM21G"));
  for (const typed of ["k7qm21g", "K7QM21G", "https://any.host/t/k7qm21g", "HTTPS://X/T/K7QM21G/?a=1", " K7QM21G "]) assert.equal(parseTag(typed), "K7QM21G");
  assert.equal(parseTag(showTag("K7QM21G")), "K7QM21G");
  assert.equal(parseTag("K7QM210"), null);
});
