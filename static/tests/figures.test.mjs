import test from "node:test";
import assert from "node:assert/strict";
import { readFileSync } from "node:fs";
import { parseNumber } from "../number.mjs";

const UNITS = { ms: ["ms", "s"], g: ["g", "oz", "N"], V: ["V", "mV"], mA: ["mA", "A"], ohm: ["ohm", "kohm"] };
const { figures } = JSON.parse(readFileSync(new URL("../../testdata/figures.json", import.meta.url), "utf8"));

for (const { text, unit, value, bound = "value", refused, negative } of figures) {
  test(`figures: ${JSON.stringify(text)} in ${unit}`, () => {
    const read = parseNumber(text, unit, UNITS[unit] ?? [unit]);
    if (refused) assert.ok(read.error);
    else if (negative) assert.equal(read.error, "negative");
    else if (bound === "over") assert.equal(read.error, "over_range");
    else if (text.trim() === "") assert.equal(read, null);
    else assert.ok(Math.abs(read[bound] - value) <= 1e-9 * value, JSON.stringify(read));
  });
}
