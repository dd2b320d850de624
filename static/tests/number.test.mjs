import test from "node:test";
import assert from "node:assert/strict";
import { checkReading } from "../reading-check.mjs";
import { convert, parseNumber, showNumber } from "../number.mjs";

const cases = [
  ["4,5", "mA", ["mA"], { typed: "4,5", unit: "mA", value: 4.5 }],
  ["4.5", "mA", ["mA"], { typed: "4.5", unit: "mA", value: 4.5 }],
  [" 6.8 mA ", "mA", ["mA"], { typed: "6.8", unit: "mA", value: 6.8 }],
  ["0.3 s", "ms", ["ms", "s"], { typed: "0.3", unit: "s", value: 300 }],
  ["0,3s", "ms", ["ms", "s"], { typed: "0,3", unit: "s", value: 300 }],
  ["<0.1", "ohm", ["ohm"], { typed: "0.1", unit: "ohm", below: 0.1 }],
  ["> 310 ms", "ms", ["ms", "s"], { typed: "310", unit: "ms", above: 310 }],
  ["4 677", "ms", ["ms"], { typed: "4 677", unit: "ms", value: 4677 }],
  ["1\u202f234.5", "ms", ["ms"], { typed: "1 234.5", unit: "ms", value: 1234.5 }],
  ["0,310", "ohm", ["ohm"], { typed: "0,310", unit: "ohm", value: 0.31 }],
  ["1.234", "ohm", ["ohm"], { typed: "1.234", unit: "ohm", value: 1.234 }],
  ["12.", "mA", ["mA"], { typed: "12.", unit: "mA", value: 12 }],
  ["0.31 Ω", "ohm", ["ohm"], { typed: "0.31", unit: "ohm", value: 0.31 }],
  ["250 MΩ", "Mohm", ["Mohm"], { typed: "250", unit: "Mohm", value: 250 }],
  ["2,5 %", "%", ["%"], { typed: "2,5", unit: "%", value: 2.5 }],
  ["1,234.5", "ms", ["ms", "s"], { typed: "1,234.5", unit: "ms", value: 1234.5 }],
  ["1.234,5", "ms", ["ms", "s"], { typed: "1.234,5", unit: "ms", value: 1234.5 }],
  ["1,234.5 s", "ms", ["ms", "s"], { typed: "1234.5", unit: "s", value: 1234500 }],
  ["120 mV", "V", ["V", "mV"], { typed: "120", unit: "mV", value: 0.12 }],
];

for (const [typed, own, units, want] of cases) {
  test(`number: ${JSON.stringify(typed)} is read`, () => assert.deepEqual(parseNumber(typed, own, units), want));
}

const refused = [
  ["1,234", "ambiguous"], ["4,677 ms", "ambiguous"], ["1.2.3", "not_a_number"], ["OL", "over_range"], ["\u22124", "negative"],
  ["-4", "negative"], ["abc", "not_a_number"], ["4 5", "not_a_number"], ["--4", "not_a_number"], ["4 kg", "unknown_unit"], [",", "not_a_number"],
  ["1e5", "unknown_unit"], ["99999999999999999999", "not_a_number"],
];
for (const [typed, error] of refused) {
  test(`number: ${JSON.stringify(typed)} is refused as ${error}`, () => assert.equal(parseNumber(typed, "ms", ["ms", "s"]).error, error));
}

test("number: what may be milliohms is not taken for megohms", () => assert.equal(parseNumber("0.5 mohm", "Mohm").error, "unknown_unit"));
test("number: nothing typed says nothing", () => assert.equal(parseNumber("  ", "ms"), null));
test("number: a chosen unit holds where none is typed", () => assert.deepEqual(parseNumber("0.3", "ms", ["ms", "s"], "s"), { typed: "0.3", unit: "s", value: 300 }));
test("number: a typed unit wins over the chosen one", () => assert.equal(parseNumber("300 ms", "ms", ["ms", "s"], "s").value, 300));

// International avoirdupois ounce, 28.349523125 g exactly (NIST Handbook 44, appendix C).
test("number: 4 oz in grams", () => assert.equal(convert(4, "oz", "g"), 113.3980925));
test("number: units of another family do not convert", () => assert.equal(convert(4, "oz", "ms"), undefined));

test("number: shown with four digits and thin groups", () => {
  assert.equal(showNumber(4676.6123), "4\u202f677");
  assert.equal(showNumber(0.31), "0.31");
  assert.equal(showNumber(10000), "10\u202f000");
  assert.equal(showNumber(6.5345), "6.535");
});

test("number: what is typed and its value agree by the rule the server checks", () => {
  for (const [typed, own, units] of cases) {
    const r = parseNumber(typed, own, units);
    checkReading({ ms: "trip_time_ms", mA: "trip_current_ma", ohm: "ground_ohm", Mohm: "insulation_mohm", V: "neutral_ground_v", "%": "voltage_drop_pct" }[own], r);
  }
});
