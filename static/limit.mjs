// Limits as they apply, on the phone: the same figures as forms/curve.go, forms/apply.go and forms/prove.go.

import { perUnit, typedNumber } from "./reading.mjs";

/** Rounds to 9 significant digits, halves up, by the same few exact operations as forms/curve.go. */
export function round9(x) {
  if (!(x >= 1e-13 && x < 1e22)) return x;
  let k = 8;
  for (let p = 1; x >= p * 10; p *= 10) k--;
  for (let y = x; y < 1; y *= 10) k++;
  const pow10 = (n) => { let p = 1; for (; n > 0; n--) p *= 10; return p; };
  return k >= 0 ? Math.floor(x * pow10(k) + 0.5) / pow10(k) : Math.floor(x / pow10(-k) + 0.5) * pow10(-k);
}

/** Longest trip time in ms at a test current in mA: (20/I)^1.43 s, UL 943 Class A; undefined outside 6 to 264 mA. */
export function classATripMS(current) {
  return current >= 6 && current <= 264 ? round9(1000 * Math.pow(20 / current, 1.43)) : undefined;
}

/** Current in mA that the slowest device inside a most of the set shows on a ramp of r mA/s (integral of the curve, from that most on). */
export function rampMA(most, r) {
  return round9(Math.pow(Math.pow(most, 2.43) + 2.43 * Math.pow(20, 1.43) * r, 1 / 2.43));
}

/** Ramp in mA/s, 0 where nothing is known of it. */
export function rampRate(ramp) {
  if (ramp?.ma_per_s > 0) return ramp.ma_per_s;
  return ramp?.step_ma > 0 && ramp?.dwell_ms > 0 ? (ramp.step_ma / ramp.dwell_ms) * 1000 : 0;
}

/** Finds the bounds a limit sets: {limit, no_trip, unit, text (why nothing is judged), lacks, low}. */
export function apply(facts, l, r) {
  for (const v of l.void ?? []) if (facts.all(v.when)) return { text: v.text };
  if (l.flag) return {};
  if (l.over_range) return { over_range: true };
  if (l.per_length) return applyLength(facts, l.per_length);
  if (l.curve) return applyCurve(facts);
  if (l.of_rated || l.over_rated) return applyRated(facts, l);
  if (l.by_multiple) return applyMultiple(facts, l);
  if (l.bond && !bondJudged(facts)) return { text: "limit.bond_not_judged" };
  const other = r?.value !== undefined && l.by_unit?.[r.unit];
  return other ? { limit: bounds(other), unit: r.unit } : { limit: bounds(l) };
}

function bounds({ min, max, one_of }) {
  const b = {};
  if (min !== undefined) b.min = min;
  if (max !== undefined) b.max = max;
  if (one_of) b.one_of = one_of;
  return b;
}

function applyCurve(facts) {
  const { current, scaled } = facts.testCurrent(round9);
  if (current === undefined) return { lacks: "test_current_ma", text: "limit.no_test_current" };
  const at = scaled ? { scaled_ma: current } : {};
  if (current < 4) return { no_trip: true, low: true, ...at };
  if (current < 6) return { text: "limit.below_curve", ...at };
  if (current > 264) return { text: "limit.above_curve", ...at };
  return { limit: { max: classATripMS(current) }, current, ...at };
}

function applyLength(facts, { base, ohm_per_m: table }) {
  const length = facts.field("length_m"), size = conductorSize(facts.field("gauge"));
  if (typeof length !== "number" || !Object.hasOwn(table, size)) return { text: "limit.no_length" };
  return { limit: { max: round9(base + length * table[size]) } };
}

/** A conductor size as the table has it: "14 AWG", "#14" are "14"; "2.5 mm²" is "2.5mm2". */
function conductorSize(gauge) {
  return String(gauge ?? "").toLowerCase().replaceAll(" ", "").replaceAll("awg", "").replaceAll("#", "").replaceAll("²", "2").replaceAll("sqmm", "mm2").replaceAll(",", ".");
}

function applyRated(facts, l) {
  const rated = facts.field("rated_residual_ma");
  if (typeof rated !== "number") return { lacks: "rated_residual_ma", text: "limit.no_rating" };
  if (l.over_rated) return { limit: { max: round9(l.over_rated / rated) } };
  const b = {};
  if (l.of_rated.min !== undefined) b.min = round9(l.of_rated.min * rated);
  if (l.of_rated.max !== undefined) b.max = round9(l.of_rated.max * rated);
  return { limit: b };
}

function applyMultiple(facts, l) {
  const multiple = facts.number("multiple");
  if (multiple === undefined) return { lacks: "multiple", text: "limit.no_multiple" };
  const rung = l.by_multiple.find((x) => x.multiple === multiple);
  if (!rung) return { text: "limit.multiple_outside" };
  return rung.no_trip ? { no_trip: true } : { limit: bounds(rung) };
}

function bondJudged(facts) {
  const load = facts.number("load_a"), drop = facts.number("voltage_drop_pct"), volts = facts.number("voltage_v");
  if (load === undefined || drop === undefined || volts === undefined) return false;
  return load >= 5 && round9((drop * volts) / 200) > 0.5;
}

/** The number a limit in the given unit is held against: what was typed where it was typed in that unit. */
export function figure(r, own, unit) {
  if (unit === own) return r.value;
  const typed = typedNumber(r.typed);
  if (typed !== undefined && r.unit === unit) return typed;
  return round9(r.value / perUnit(own, unit));
}

/** What a reading proves about bounds: inside, low, high, other or unproven. */
export function prove(b, r, own, unit) {
  if (typeof r.value === "string") return b.one_of?.includes(r.value) ? "inside" : "other";
  if (r.no_trip) return "unproven";
  if (r.above !== undefined) {
    if (b.max !== undefined) return r.above >= b.max ? "high" : "unproven";
    return b.min === undefined || r.above >= b.min ? "inside" : "unproven";
  }
  if (r.below !== undefined) {
    if (b.min !== undefined && r.below <= b.min) return "low";
    return (b.min === undefined || b.min <= 0) && (b.max === undefined || r.below <= b.max) ? "inside" : "unproven";
  }
  const v = figure(r, own, unit);
  if (b.min !== undefined && v < b.min) return "low";
  return b.max !== undefined && v > b.max ? "high" : "inside";
}

/** Weighs a go/no-go answer by the mass of the gauge: [outcome, text]. */
export function gaugeProof(l, gauge, outcome) {
  const at = (gauge ?? "").trim().indexOf(" ");
  if (at < 0) return [outcome, ""];
  const mass = typedNumber(gauge.trim().slice(0, at));
  const need = l.gauge[gauge.trim().slice(at + 1).trim()];
  if (mass === undefined || need === undefined) return [outcome, ""];
  if (outcome === "inside" && mass < need) return ["unproven", "limit.gauge_too_light"];
  if (outcome !== "inside" && mass > need) return ["unproven", "limit.gauge_too_heavy"];
  return [outcome, ""];
}
