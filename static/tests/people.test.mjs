import test from "node:test";
import assert from "node:assert/strict";
import { peopleHere } from "../people.mjs";
import { afterWrong, fitsPin, isPin, PAUSE, sealPin } from "../pin.mjs";

const hexOf = (b) => [...b].map((x) => x.toString(16).padStart(2, "0")).join("");

// RFC 7914 section 11, test vectors of PBKDF2-HMAC-SHA-256: its first 32 bytes.
test("PIN: the hash is PBKDF2-HMAC-SHA-256", async () => {
  const sealed = await sealPin("passwd", { salt: new TextEncoder().encode("salt"), rounds: 1 });
  assert.equal(hexOf(sealed.hash), "55ac046e56e3089fec1691c22544b605f94185216dde0465e68b9d57c20dacbc");
  const slow = await sealPin("Password", { salt: new TextEncoder().encode("NaCl"), rounds: 80000 });
  assert.equal(hexOf(slow.hash), "4ddcd8f60b98be21830cee5ef22701f9641a4418d04c0414aeff08876b34ab56");
  assert.equal(await fitsPin("Password", slow), true);
  assert.equal(await fitsPin("Passwort", slow), false);
});

test("PIN: six to twelve digits; salted; after five wrong ones a minute's pause", async () => {
  assert.deepEqual(["123456", "12345", "1234567890123", "12345a", ""].map(isPin), [true, false, false, false, false]);
  assert.notDeepEqual((await sealPin("123456", { rounds: 1 })).hash, (await sealPin("123456", { rounds: 1 })).hash);
  let row = {};
  for (let i = 0; i < 4; i++) row = afterWrong(row, 1000);
  assert.deepEqual(row, { wrong: 4 });
  assert.deepEqual(afterWrong(row, 1000), { wrong: 0, until: 1000 + PAUSE });
});

test("people: only who signed in here and set a PIN comes back by it, and the next record is theirs", async () => {
  const kept = {}, state = { me: { person: "a", name: "Crew 1", people: { a: { name: "Crew 1" }, b: { name: "Crew 2" } } } };
  let clock = 1000;
  const here = peopleHere({ state, draw() {}, changed() {} }, { now: () => clock, tray: { setMe: async (k, v) => { kept[k] = v; }, become: async (person, name) => Object.assign(kept, { person, name }) } });
  assert.equal(await here.switchTo("b", "222222"), "phone.pin_none");
  assert.equal(await here.switchTo("c", "222222"), "phone.pin_none");
  assert.equal(await here.setPin("111111"), null);
  Object.assign(state.me, { person: "b", name: "Crew 2" });
  assert.equal(await here.switchTo("a", "111112"), "phone.pin_wrong");
  assert.equal(state.me.person, "b");
  assert.equal(await here.switchTo("a", "111111"), null);
  assert.deepEqual([kept.person, kept.name, state.me.person], ["a", "Crew 1", "a"]);
  assert.equal(await here.setPin("333333", "999999"), "phone.pin_wrong", "the PIN of before is asked for");
  assert.ok(!JSON.stringify(kept).includes("111111"));
  for (let i = 0; i < 4; i++) await here.switchTo("a", "000000");
  assert.equal(await here.switchTo("a", "111111"), "phone.pin_wait");
  clock += PAUSE;
  assert.equal(await here.switchTo("a", "111111"), null);
});
