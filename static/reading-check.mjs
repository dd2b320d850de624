// Refuses readings and facts that make no sense: the same sentences as forms/check.go. Held against the vectors; a phone's
// own pages cannot write such a thing, so this does not travel with them. Pure.

import { Refusal, codeOf, maxMagnitude, missingReasons, perUnit, textNumberRange, typedNumber, under } from "./reading.mjs";

const conditionCodes = ["multiple", "phase_deg", "waveform", "face", "test_current_ma", "loads_disconnected"];
const mayNotTrip = ["trip_time_ms", "trip_current_ma"];

/** Refuses a reading its code cannot have. r is as readReading gives it. */
export function checkReading(code, r) {
  const c = codeOf.get(code);
  if (!c) throw new Refusal("", `"${code}" is no reading Tripwell knows. "tripwell forms" lists them.`);
  if (r.missing) {
    if (!missingReasons.includes(r.missing)) throw new Refusal("", `"${r.missing}" is no reason for a missing reading. Use one of: ${missingReasons.join(", ")}.`);
    return;
  }
  if (c.type !== "number") {
    if (typeof r.value === "string" && !c.options) return; // a check of an organisation's own: its form says what may be answered
    if (typeof r.value !== "string" || !c.options.includes(r.value)) throw new Refusal("", `${code} is answered with one of: ${c.options.join(", ")}.`);
    return;
  }
  if (r.no_trip && mayNotTrip.includes(code)) return;
  const v = r.above ?? r.below ?? r.value;
  if (typeof v !== "number") throw new Refusal("", `${code} is a number in ${c.unit}.`);
  if (typeof r.value !== "number" && !c.test) throw new Refusal("", `${code} is a condition of the test, not a result: a bound says nothing. Give the figure.`);
  if (!(Math.abs(v) <= maxMagnitude)) throw new Refusal("", textNumberRange);
  if (v < 0) throw new Refusal("", `${code} cannot be negative.`);
  checkTyped(c, r, v);
}

function checkTyped(c, r, v) {
  const unit = r.unit || c.unit;
  const per = perUnit(c.unit, unit);
  if (per === undefined) throw new Refusal("", `${c.reading} is measured in ${c.unit}; "${unit}" is no unit for it.`);
  const typed = typedNumber(r.typed);
  if (typed === undefined) {
    if (unit !== c.unit) throw new Refusal("", `The value of ${c.reading} is always in ${c.unit}. With the unit "${unit}", give what was typed beside it and the value converted to ${c.unit}.`);
    return;
  }
  if (Math.abs(typed * per - v) > 0.001 * v) throw new Refusal("", `What was typed ("${r.typed}" ${unit}) is not the value given in ${c.unit}. Correct one of them.`);
}

/** Refuses the first bad reading by code. */
export function checkReadings(readings, path) {
  for (const code of Object.keys(readings).sort()) under(`${path}.${code}`, () => checkReading(code, readings[code]));
}

/** Refuses an item of a series that says too little or too much. */
export function checkItem(item, path) {
  if (!item.at || Object.keys(item.at).length === 0) throw new Refusal(`${path}.at`, 'Say under which conditions this was taken: {"at":{"multiple":5},"trip_time_ms":24}.');
  for (const name of Object.keys(item.at).sort()) under(`${path}.at.${name}`, () => checkAt(name, item.at[name]));
  if (Object.keys(item.readings).length === 0) throw new Refusal(path, 'An item of series holds at least one reading beside "at".');
  checkReadings(item.readings, path);
}

function checkAt(name, v) {
  if (!conditionCodes.includes(name)) throw new Refusal("", `"${name}" is no condition a reading is taken at. Use one of: ${conditionCodes.join(", ")}.`);
  if (name === "face") {
    if (typeof v !== "string" || !/^[a-z][a-z0-9-]{0,31}$/.test(v)) throw new Refusal("", '"face" is a short name in lower case, such as upper or lower.');
    return;
  }
  checkReading(name, { value: v });
}

/** Refuses what is given beside the readings where it makes no sense. */
export function checkGiven(form, given) {
  if (given.kind && !form.kinds.includes(given.kind)) throw new Refusal("given.kind", `The form ${form.form} does not serve the kind "${given.kind}". It serves: ${form.kinds.join(", ")}.`);
  for (const [name, first, second] of [["equipment_ground", "yes", "none-permitted"], ["supply", "grounded", "isolated"], ["loads", "connected", "disconnected"]]) {
    if (given[name] && given[name] !== first && given[name] !== second) throw new Refusal(`given.${name}`, `${name} is one of: ${first}, ${second}.`);
  }
  for (const name of ["rated_residual_ma", "rating_a", "nominal_v", "faces", "test_resistor_ohm", "test_nominal_v"]) checkFact(name, given[name]);
  for (const name of ["ma_per_s", "step_ma", "dwell_ms"]) checkFact(`ramp.${name}`, given.ramp?.[name]);
  for (const code of Object.keys(given.accuracy ?? {}).sort()) {
    if (codeOf.get(code)?.type !== "number") throw new Refusal(`given.accuracy.${code}`, `"${code}" is no reading that is a number. "tripwell forms" lists them.`);
    checkFact(`accuracy.${code}.percent`, given.accuracy[code].percent);
    checkFact(`accuracy.${code}.plus`, given.accuracy[code].plus);
  }
}

function checkFact(name, v) {
  if (v === undefined || v === null) return;
  if (!(Math.abs(v) <= maxMagnitude)) throw new Refusal(`given.${name}`, textNumberRange);
  if (v < 0) throw new Refusal(`given.${name}`, `${name.slice(name.lastIndexOf(".") + 1)} cannot be negative.`);
}
