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

export const maxMagnitude = 2 ** 53;

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
