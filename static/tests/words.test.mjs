import test from "node:test";
import assert from "node:assert/strict";
import { readdirSync, readFileSync } from "node:fs";
import { languageOf, speaker } from "../words.mjs";

const read = (lang) => JSON.parse(readFileSync(new URL(`../words/${lang}.json`, import.meta.url)));
const [en, es] = [read("en"), read("es")];

function* flat(tree, prefix = "") {
  for (const [k, v] of Object.entries(tree)) {
    if (typeof v === "object" && !("one" in v && "other" in v)) yield* flat(v, `${prefix}${k}.`);
    else yield [prefix + k, v];
  }
}
const places = (v) => [...new Set(JSON.stringify(v.other ?? v).match(/\{[a-z_]+\}/g) ?? [])].sort();

test("words: the Spanish catalogue has the keys of the English one in every section it has, with the same places", () => {
  const own = new Map(flat(es));
  for (const [key, text] of flat(Object.fromEntries(Object.keys(es).map((s) => [s, en[s]])))) {
    assert.ok(own.has(key), `words/es.json lacks ${key}: add it in Spanish`);
    assert.deepEqual(places(own.get(key)), places(text), key);
    assert.equal(typeof own.get(key), typeof text, key);
    own.delete(key);
  }
  assert.deepEqual([...own.keys()], [], "keys the English catalogue no longer has");
});

test("words: every section the phone's pages name is there in Spanish", () => {
  const named = new Set();
  for (const f of readdirSync(new URL("..", import.meta.url)).filter((f) => f.endsWith(".mjs")))
    for (const [, section] of readFileSync(new URL(`../${f}`, import.meta.url), "utf8").matchAll(/say(?:\.has)?\([^()]*?["`]([a-z]+)\./g)) if (section in en) named.add(section);
  assert.ok(named.size >= 12);
  assert.deepEqual([...named].filter((s) => !(s in es)), []);
});

test("words: the first language of the browser's wishes that there is; what one catalogue lacks the other says", () => {
  assert.equal(languageOf(["fr-CA", "es-MX", "en"]), "es");
  assert.equal(languageOf(["en-US", "es"]), "en");
  assert.equal(languageOf([]), "en");
  const say = speaker({ a: "uno" }, { fallback: { a: "one", b: "two" }, lang: "es" });
  assert.deepEqual([say("a"), say("b"), say("c"), say.lang], ["uno", "two", "c", "es"]);
});
