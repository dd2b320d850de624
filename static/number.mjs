// Reads a number as a person types it on a phone: "4,5", "0.3 s", "<0.1", ">310 ms". Refuses what could mean two
// numbers ("1,234", "1.234,5") rather than guess. Pure.

/** Units and what one of them is in the base unit of its family. 1 oz = 28.349523125 g (exact, avoirdupois). */
const FACTORS = {
  s: ["ms", 1000], ms: ["ms", 1],
  oz: ["g", 28.349523125], N: ["g", 101.97162129779283], g: ["g", 1],
  A: ["mA", 1000], mA: ["mA", 1], kohm: ["ohm", 1000], V: ["V", 1], mV: ["V", 0.001],
  ohm: ["ohm", 1], Mohm: ["Mohm", 1], "%": ["%", 1], deg: ["deg", 1], x: ["x", 1],
};

/** What people write for a unit. */
const SPELLINGS = { "k\u03a9": "kohm", "k\u2126": "kohm", "\u03a9": "ohm", "\u2126": "ohm", ohms: "ohm", "M\u03a9": "Mohm", "M\u2126": "Mohm", "\u00b0": "deg", "\u00d7": "x", sec: "s" };

const spelling = (text, units) => units.find((u) => u === text)
  ?? units.find((u) => u === SPELLINGS[text])
  ?? units.find((u) => u.toLowerCase() === text.toLowerCase() && !(u.startsWith("M") && text.startsWith("m"))); // "mohm" for megohms may be milliohms

/** Rounds away what multiplying in binary adds (0.3 s is 300 ms, not 299.99…). */
export const tidy = (x) => Number(x.toPrecision(12));

/** A value in one unit, in another of the same family; undefined when they are not. */
export function convert(value, from, to) {
  if (from === to) return value;
  const [a, fa] = FACTORS[from] ?? [];
  const [b, fb] = FACTORS[to] ?? [];
  return a !== undefined && a === b ? tidy(value * fa / fb) : undefined;
}

const OVER = /^[+>]?\s*(?:o\.?l\.?|0\.?l\.?|o\/?r|over(?:[- ]?(?:load|range|limit))?|ovrng|out of range|∞|inf)\s*\S{0,8}$/iu;

/**
 * parseNumber("0,3 s", "ms", ["ms","s"]) → {typed:"0,3", unit:"s", value:300}; "<0.1" → {…, below}; ">310" → {…, above}.
 * typed keeps the figure as it was typed, the unit beside it. Nothing typed gives null; what cannot be read gives {typed, error} with error one of the words field.number.ERROR:
 * ambiguous, not_a_number, negative, unknown_unit, over_range. Digits and marks are read as forms/figure.go reads them (testdata/figures.json).
 */
export function parseNumber(typed, own, units = [own], chosen = own) {
  const text = typed.trim().replace(/[\s\u2009\u202f\u00a0]+/gu, " ").replaceAll("\u2212", "-").replaceAll("’", "'");
  if (text === "") return null;
  if (OVER.test(text)) return { typed, error: "over_range" };
  const m = /^(?:([<>≤≥])=?|=)?\s*([+-]?\d[\d.,' ]*|[+-]?[.,]\d+)\s*([^\d\s.,]\S{0,11})?$/u.exec(text);
  if (!m) return { typed, error: "not_a_number" };
  const [, sign, digits, suffix] = m;
  let unit = chosen;
  if (suffix) {
    unit = spelling(suffix, [...new Set([own, ...units])]);
    if (!unit) return { typed, error: "unknown_unit" };
  }
  const plain = plainDigits(digits.trim());
  if (plain.error) return { typed, error: plain.error };
  const value = convert(Number(plain.text), unit, own);
  if (value === undefined || !Number.isFinite(value) || Math.abs(value) > 2 ** 53) return { typed, error: "not_a_number" };
  if (value < 0 || Object.is(value, -0)) return { typed, error: "negative" };
  const read = { typed: plain.grouped && unit !== own ? plain.text : digits.trim(), unit };
  if (sign === "<" || sign === "≤") return { ...read, below: value };
  if (sign === ">" || sign === "≥") return { ...read, above: value };
  return { ...read, value };
}

/** Digits with a decimal mark and perhaps thousands apart; a lone comma before exactly three digits may be either mark, so it is refused. */
function plainDigits(d) {
  const grouped = [[/^[+-]?[1-9]\d{0,2}(,\d{3})+\.\d+$/, ","], [/^[+-]?[1-9]\d{0,2}(,\d{3}){2,}$/, ","], [/^[+-]?[1-9]\d{0,2}(\.\d{3})+,\d+$/, "."],
    [/^[+-]?[1-9]\d{0,2}(\.\d{3}){2,}$/, "."], [/^[+-]?\d{1,3}([ ']\d{3})+([.,]\d*)?$/, /[ ']/g]].find(([shape]) => shape.test(d));
  if (grouped) d = d.replaceAll(grouped[1], "");
  else if (/^[+-]?[1-9]\d{0,2},\d{3}$/.test(d)) return { error: "ambiguous" };
  if (!/^[+-]?(\d{1,15}|\d{1,15}[.,]\d{0,15}|[.,]\d{1,15})$/.test(d)) return { error: "not_a_number" };
  return { text: d.replace(",", ".").replace(/\.$/, "").replace(/^\+/, ""), grouped: Boolean(grouped) };
}

/** A number for eyes: at most `digits` significant digits after rounding, thin spaces from ten thousand on. */
export function showNumber(x, digits = 4) {
  if (!Number.isFinite(x)) return "";
  const rounded = Math.abs(x) >= 1000 ? Math.round(x) : Number(x.toPrecision(digits));
  const [whole, part] = String(rounded).split(".");
  const grouped = whole.length > 4 || (whole.length === 4 && !part) ? whole.replace(/\B(?=(\d{3})+$)/g, "\u202f") : whole;
  return part ? `${grouped}.${part}` : grouped;
}
