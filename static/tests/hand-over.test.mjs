import test from "node:test";
import assert from "node:assert/strict";
import { codesOf, devicesOf, gather, isWhole, readCode, roundOf } from "../hand-over.mjs";
import { encodeQR } from "../vendor/qr-index.mjs";
import { decodeQR } from "../vendor/qr-decode.mjs";
import { newId } from "../record-line.mjs";

const devices = Array.from({ length: 130 }, () => ({ id: newId(1_800_000_000_000) }));

test("hand over: a long round goes in several codes, read in any order, and is the same list there", () => {
  const given = devices.slice(7, 127).map((d) => d.id), codes = codesOf("north-2", given);
  assert.equal(codes.length, 3);
  let read = null;
  for (const text of [codes[2], codes[0], codes[2], codes[1]]) {
    assert.equal(isWhole(read), false);
    read = gather(read, readCode(text));
  }
  assert.equal(isWhole(read), true);
  assert.deepEqual(devicesOf(devices, read), { ids: given, unknown: 0 });
  assert.deepEqual(devicesOf(devices.slice(0, 20), read), { ids: given.slice(0, 13), unknown: 107 });
});

test("hand over: a code holds a site, places in the list and ends of ids, and no more", () => {
  assert.match(codesOf("NORTH", [devices[0].id])[0], /^TRIPWELL\/ROUND\/1\/NORTH\/1\/1\/[0-9A-F]{10}$/);
});

test("hand over: a round made in the office is known again on the other phone, and is no walk of the day", () => {
  const rounds = [{ id: newId(1_800_000_000_000) }, { id: newId(1_800_000_000_000) }], ids = devices.slice(0, 60).map((d) => d.id), codes = codesOf("north-2", ids, rounds[1].id);
  assert.match(codes[0], /^TRIPWELL\/ROUND\/2\/NORTH-2\/[0-9A-F]{10}\/1\/2\//);
  const read = codes.map(readCode).reduce(gather, null);
  assert.deepEqual([isWhole(read), devicesOf(devices, read), roundOf(rounds, read)], [true, { ids, unknown: 0 }, rounds[1]]);
  assert.equal(roundOf(rounds, readCode(codesOf("NORTH-2", ids)[0])), undefined);
  assert.deepEqual(Object.keys(gather(read, readCode(codesOf("NORTH-2", ids)[0])).parts), ["1"], "begun anew");
});

test("hand over: nothing else is taken for one", () => {
  for (const text of ["", null, "HTTPS://A/T/K7QM2P3", "TRIPWELL/ROUND/1/NORTH/2/1/", "TRIPWELL/ROUND/1/NORTH/1/1/ABC", "TRIPWELL/ROUND/2/NORTH/1/1/", "tripwell/round/1/north/1/1/"]) assert.equal(readCode(text), null, String(text));
  const one = gather(null, readCode(codesOf("A1", [devices[0].id])[0]));
  assert.deepEqual(Object.keys(gather(one, readCode(codesOf("B1", [devices[1].id])[0])).parts), ["1"]);
});

test("hand over: what the screen shows is what a camera reads", () => {
  const text = codesOf("NORTH", devices.slice(0, 50).map((d) => d.id))[0], rows = encodeQR(text, "raw", { ecc: "low", border: 4 }), scale = 6, side = rows.length * scale;
  assert.ok(rows.length <= 77, `${rows.length} modules with their margin are too many for a small screen`);
  const data = new Uint8ClampedArray(side * side * 4).fill(255);
  for (let y = 0; y < side; y++) for (let x = 0; x < side; x++) if (rows[Math.floor(y / scale)][Math.floor(x / scale)]) data.fill(0, (y * side + x) * 4, (y * side + x) * 4 + 3);
  assert.equal(decodeQR({ width: side, height: side, data }), text);
});
