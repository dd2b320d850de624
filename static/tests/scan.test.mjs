import test from "node:test";
import assert from "node:assert/strict";
import { codeReader } from "../scan-reader.mjs";
import { pageRead, tagTyped } from "../tag-typed.mjs";
import { checkCharacter } from "../tag.mjs";

const good = `K7QM2P${checkCharacter("K7QM2P")}`;

test("tag typed: a tag, with hyphens, in lower case, or as the address on a label of any host", () => {
  for (const text of [good, good.toLowerCase(), `${good.slice(0, 3)}-${good.slice(3, 6)}-${good.slice(6)}`, `HTTPS://ELSEWHERE.INVALID/T/${good}`, `https://elsewhere.invalid/t/${good}?x=1#y`])
    assert.deepEqual(tagTyped(text), { tag: good }, text);
});

test("tag typed: a wrong check character is told, a place or an unfinished tag is not", () => {
  const wrong = good.slice(0, 6) + (good[6] === "3" ? "4" : "3");
  assert.deepEqual(tagTyped(wrong), { error: "scan.check" });
  assert.deepEqual(tagTyped(good + "7"), { error: "scan.too_long" });
  for (const text of ["", "K7Q-M", "kitchen", "Pantry, by the sink", "LP-2 / 14", "bathroom"]) assert.deepEqual(tagTyped(text), {}, text);
});

test("tag typed: a code that is none of ours is told", () => {
  assert.deepEqual(tagTyped("https://elsewhere.invalid/offer", { whole: true }), { error: "scan.not_ours" });
});

test("code reader: the browser's own reader is used where it reads QR codes, and nothing is fetched then", async () => {
  class Detector {
    static getSupportedFormats = async () => ["qr_code"];
    detect = async (video) => (video.code ? [{ rawValue: video.code }] : []);
  }
  const read = await codeReader({ Detector, load: () => assert.fail("fetched") });
  assert.equal(await read({ code: "X" }), "X");
  assert.equal(await read({}), null);
});

test("code reader: elsewhere a decoder is loaded; a picture without a code is null", async () => {
  let drawn = null;
  const pen = { drawImage: (_, __, ___, w, h) => { drawn = [w, h]; }, getImageData: () => "picture" };
  let decode = () => { throw new Error("no code"); };
  const read = await codeReader({ Detector: undefined, load: async () => ({ decodeQR: (x) => decode(x) }), canvas: () => ({ getContext: () => pen }) });
  assert.equal(await read({ videoWidth: 1440, videoHeight: 720 }), null);
  assert.deepEqual(drawn, [720, 360]);
  decode = (x) => `read ${x}`;
  assert.equal(await read({ videoWidth: 100, videoHeight: 50 }), "read picture");
});

test("code read: a label opens its device, the sheet of a round its round, whatever host they name", () => {
  const round = "0197b2c0-0000-7000-8000-00000000000a";
  assert.deepEqual(pageRead(`HTTPS://ELSEWHERE.INVALID/T/${good}`), { value: `#tag=${good}` });
  assert.deepEqual(pageRead(`https://elsewhere.invalid/field#/round/KILN-LANE/${round}`), { value: `#/round/KILN-LANE/${round}` });
  for (const text of [`https://elsewhere.invalid/field#/round/KILN-LANE/${round}/x`, "https://elsewhere.invalid/field#/people", "javascript:alert(1)//field#/round/A/1"]) assert.ok(pageRead(text).error, text);
});
