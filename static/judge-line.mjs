// One line of the command verdict, judged in JavaScript: the same refusals as forms/line.go. Pure.

import { judge } from "./judge.mjs";
import { defaultLimitSet } from "./judging.mjs";
import { checkGiven, checkItem, checkReadings } from "./reading-check.mjs";
import { Refusal, isObject, readItem, readReading, under } from "./reading.mjs";

const text = "text", num = "a number", whole = "a whole number", bool = "true or false", object = "an object";
const accuracyShape = { each: { percent: num, plus: num } };
const givenShape = {
  kind: text, rated_residual_ma: num, form_rev: whole, limit_set: text, limit_rev: whole, instrument: text,
  calibration_due: "a date, written 2026-12-31", accuracy: accuracyShape, ramp: { ma_per_s: num, step_ma: num, dwell_ms: num },
  equipment_ground: text, supply: text, loads: text, retention_gauge: text, gauge: text, test_resistor_ohm: num, test_nominal_v: num, rating_a: num, nominal_v: num, delayed: bool, faces: whole, waveform: text, fields: object,
};
const lineShape = { form: text, limit_set: text, rated_residual_ma: num, accuracy: accuracyShape, given: givenShape, readings: object, series: "a list" };

const shapes = {
  [text]: (v) => typeof v === "string", [num]: (v) => typeof v === "number", [whole]: Number.isInteger, [bool]: (v) => typeof v === "boolean",
  [object]: isObject, "a list": Array.isArray,
  "a date, written 2026-12-31": (v) => v === "" || (/^\d{4}-\d\d-\d\d$/.test(v) && !Number.isNaN(Date.parse(v)) && new Date(v).toISOString().startsWith(v)),
};

/** Refuses names no line has and values of the wrong type, as the strict decoder of the command does. */
function checkShape(value, shape, name) {
  if (value === null) return;
  if (typeof shape === "string") {
    if (!shapes[shape](value)) throw new Refusal("", `${name} must be ${shape}.`);
    return;
  }
  if (!isObject(value)) throw new Refusal("", name ? `${name} must be an object.` : "A line is one JSON object.");
  for (const [key, v] of Object.entries(value)) {
    const inner = shape.each ?? (Object.hasOwn(shape, key) ? shape[key] : undefined);
    if (!inner) throw new Refusal(key, `"${key}" is no name known here. Leave it out, or correct its spelling.`);
    under(key, () => checkShape(v, inner, key));
  }
}

/** Judges one line as the command verdict does, under {forms, limit_sets}: {result, findings}, or throws a Refusal. */
export function judgeLine(catalogue, line) {
  checkShape(line, lineShape, "");
  for (const [code, raw] of Object.entries(line.readings ?? {})) under(`readings.${code}`, () => readReading(raw));
  const series = (line.series ?? []).map((raw, i) => under(`series.${i}`, () => readItem(raw)));
  if (!line.form) throw new Refusal("form", 'Say which form this is, such as "gfci-receptacle/instrument". "tripwell forms" lists them.');
  const form = catalogue.forms.find((f) => f.form === line.form);
  if (!form) throw new Refusal("form", `There is no form "${line.form}". "tripwell forms" lists them.`);
  if (!line.readings) throw new Refusal("readings", 'Give the readings as an object: {"form":"…","readings":{"button_trips":true}}.');
  const entry = { given: shortForms(line), readings: line.readings, series: line.series };
  checkGiven(form, entry.given);
  checkReadings(Object.fromEntries(Object.entries(line.readings).map(([code, raw]) => [code, readReading(raw)])), "readings");
  series.forEach((item, i) => checkItem(item, `series.${i}`));
  return judge(form, limitSetOf(catalogue, line, form, entry.given), entry);
}

function shortForms(line) {
  const g = { ...line.given };
  if (line.rated_residual_ma) {
    if (g.rated_residual_ma && g.rated_residual_ma !== line.rated_residual_ma) throw new Refusal("rated_residual_ma", "rated_residual_ma stands twice with different values. Keep one.");
    g.rated_residual_ma = line.rated_residual_ma;
  }
  if (line.accuracy) {
    if (g.accuracy) throw new Refusal("accuracy", "accuracy stands twice. Keep one.");
    g.accuracy = line.accuracy;
  }
  return g;
}

function limitSetOf(catalogue, line, form, g) {
  const kind = g.kind || form.kinds[0];
  const field = line.limit_set ? "limit_set" : "given.limit_set";
  const id = line.limit_set || g.limit_set || defaultLimitSet(kind, g.delayed);
  const set = catalogue.limit_sets.find((s) => s.limit_set === id);
  if (!set) throw new Refusal(field, `There is no limit set "${id}". "tripwell forms" lists them.`);
  if (!set.kinds.includes(kind)) throw new Refusal(field, `The limit set "${id}" holds no limits for the kind "${kind}". It serves: ${set.kinds.join(", ")}.`);
  return set;
}
