// Readings on the phone: the same codes, the same refusals as forms/code.go, forms/reading.go and forms/check.go.
// Figures are in the code's own unit; `typed` and `unit` say what a person typed.

/** A refusal a person can act on: closed code, dotted field, whole sentence. */
export class Refusal extends Error {
  constructor(field, text) {
    super(text);
    this.code = "invalid";
    this.field = field;
    this.text = text;
  }
}

const choice = (reading, test, ...options) => ({ reading, type: "choice", options: options.length ? options : undefined, test });
const yesNo = (reading, test = true) => ({ reading, type: "yes-no", options: ["yes", "no"], test });
const number = (reading, unit, test = true) => ({ reading, type: "number", unit, test });

/** Every reading code, in the order findings outside a form's own order are given. */
export const codes = [
  choice("condition", false, "sound", "damaged", "burnt", "hot", "wet"),
  choice("found", false, "on", "tripped", "no-power"),
  choice("indicator", false, "normal", "fault", "dark", "none"),
  number("voltage_v", "V"),
  choice("wiring", true, "correct", "open-ground", "open-neutral", "open-hot", "hot-neutral-reversed", "hot-ground-reversed", "other", "not-testable"),
  choice("wiring_method", false, "lamps", "meter", "analyser"),
  yesNo("marking_present", false),
  yesNo("ground_continuous"),
  yesNo("ground_at_terminal"),
  number("ground_ohm", "ohm"),
  number("ground_point_v", "V"),
  number("neutral_ground_v", "V"),
  number("load_a", "A"),
  number("voltage_drop_pct", "%"),
  number("retention_g", "g"),
  yesNo("retention_holds"),
  number("electrode_ohm", "ohm"),
  number("loop_ohm", "ohm"),
  number("touch_voltage_v", "V"),
  number("insulation_test_v", "V"),
  number("insulation_mohm", "Mohm"),
  yesNo("button_trips"),
  yesNo("load_dead_when_tripped"),
  yesNo("button_resets"),
  yesNo("loads_disconnected", false),
  number("multiple", "x", false),
  number("phase_deg", "deg", false),
  choice("waveform", false, "ac", "pulsating-dc", "smooth-dc"),
  number("test_current_ma", "mA", false),
  number("trip_time_ms", "ms"),
  number("trip_current_ma", "mA"),
  yesNo("holds_at_half"),
  yesNo("restored"),
  yesNo("mark", false),
  yesNo("own_yes_no_1"), yesNo("own_yes_no_2"), yesNo("own_yes_no_3"),
  choice("own_choice_1", true), choice("own_choice_2", true), choice("own_choice_3", true),
  number("own_number_1", ""), number("own_number_2", ""), number("own_number_3", ""),
];

/** Code → what is known of it. */
export const codeOf = new Map(codes.map((c) => [c.reading, c]));

/** Why a reading may be missing. */
export const missingReasons = ["no-access", "circuit-dead", "unsafe", "no-instrument", "not-testable", "other"];

const conditionCodes = ["multiple", "phase_deg", "waveform", "face", "test_current_ma", "loads_disconnected"];
const mayNotTrip = ["trip_time_ms", "trip_current_ma"];
const maxMagnitude = 2 ** 53;

const textReadingShape = "A reading is a number, a word, true or false, or an object with exactly one of value, above, below, no_trip or missing.";
const textReadingKey = "A reading has only typed, unit, value, above, below, no_trip and missing. Leave out what is not one of these.";
export const textNumberRange = "This number is beyond what can be kept exactly. Give a figure between -9007199254740992 and 9007199254740992.";
const textSeriesShape = 'An item of series is an object: {"at":{"multiple":5},"trip_time_ms":24}.';
const textAtShape = '"at" is an object of numbers and words: {"multiple":5,"phase_deg":180}.';

export const isObject = (v) => typeof v === "object" && v !== null && !Array.isArray(v);

/** One of a code's own unit over one of another: 1 s = 1000 ms; undefined where it is no unit for it. */
export function perUnit(own, other) {
  if (own === other) return 1;
  return { "ms<s": 1000, "g<oz": 28.349523125, "g<N": 101.97162129779283, "V<mV": 0.001, "mA<A": 1000, "ohm<kohm": 1000 }[`${own}<${other}`];
}

/** What a person typed as a number: a decimal comma or point, no thousands separators; undefined where it is none. */
export function typedNumber(text) {
  const s = (text ?? "").trim();
  if (!/^(\d+[.,]?\d*|[.,]\d+)$/.test(s)) return undefined;
  return Number(s.replace(",", "."));
}

function scalar(v, text = textReadingShape) {
  if (v === true) return "yes";
  if (v === false) return "no";
  if (v === null || typeof v === "object" || v === undefined) throw new Refusal("", text);
  if (typeof v === "number" && !(Math.abs(v) <= maxMagnitude)) throw new Refusal("", textNumberRange);
  return v;
}

/** Reads a reading as it is written (bare or as an object) into {typed, unit, value|above|below|no_trip|missing}. */
export function readReading(raw) {
  if (!isObject(raw)) {
    const v = scalar(raw);
    return v === "no-trip" ? { no_trip: true } : { value: v };
  }
  const r = {};
  for (const [name, v] of Object.entries(raw)) readMember(r, name, v);
  if (r.value === "no-trip") {
    delete r.value;
    r.no_trip = true;
  }
  const says = ["value", "above", "below", "no_trip", "missing"].filter((name) => name in r);
  if (says.length !== 1) throw new Refusal("", textReadingShape);
  return r;
}

function readMember(r, name, raw) {
  const v = raw === null ? null : scalar(raw);
  const want = { typed: "string", unit: "string", value: "any", above: "number", below: "number", no_trip: "yes", missing: "string" }[name];
  if (!want) throw new Refusal("", textReadingKey);
  const ok = want === "any" ? v !== null : want === "yes" ? v === "yes" : typeof v === want && !(name === "missing" && v === "");
  if (!ok) throw new Refusal("", textReadingShape);
  r[name] = name === "no_trip" ? true : v;
}

/** Reads an item of a series into {at, readings}. */
export function readItem(raw) {
  if (!isObject(raw)) throw new Refusal("", textSeriesShape);
  const item = { at: undefined, readings: Object.create(null) };
  for (const [name, v] of Object.entries(raw)) {
    if (name === "at") item.at = readAt(v);
    else item.readings[name] = under(name, () => readReading(v));
  }
  return item;
}

function readAt(raw) {
  if (!isObject(raw)) throw new Refusal("at", textAtShape);
  const at = {};
  for (const [name, v] of Object.entries(raw)) {
    const shape = isObject(v) || Array.isArray(v) || v === null;
    at[name] = under(shape ? "at" : `at.${name}`, () => scalar(v, textAtShape));
  }
  return at;
}

/** Runs fn; a refusal without a field, or with one, gets the path before it. */
export function under(path, fn) {
  try {
    return fn();
  } catch (e) {
    if (e instanceof Refusal) e.field = e.field ? `${path}.${e.field}` : path;
    throw e;
  }
}

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
