// Turns a finished draft into the body of an entry.made record: the facts, what the judgement needs to know of the
// device and the instrument, and what this phone told the tester. Pure.

/** Register fields of a device that have a name of their own in `given`, and what they must be (forms/trait.go, testdata/given.json). */
const NAMED = { rated_residual_ma: Number, equipment_ground: String, rating_a: Number, nominal_v: Number, delayed: asFlag, faces: Number, waveform: String };
/** Further register fields a limit's or a form's condition may name. */
const OTHER = ["length_m", "gauge", "locking", "no_neutral", "supply_edition", "double_insulated", "new_construction", "quiet_ground",
  "earthing", "special_location", "distribution"];

/** What an instrument's register says that has the same name in `given`. */
const TESTER = ["test_resistor_ohm", "test_nominal_v", "retention_gauge"];

function asFlag(v) {
  return v === true || v === "yes" || v === "true";
}

const present = (v) => v !== undefined && v !== null && v !== "" && !Number.isNaN(v);

/** What the judgement needs beside the readings. instrument may be null. */
export function givenOf({ device, form, limitSet, instrument }) {
  const given = { kind: device.kind, form_rev: form.revision };
  if (limitSet) Object.assign(given, { limit_set: limitSet.limit_set, limit_rev: limitSet.revision });
  const said = device.fields ?? {};
  for (const [name, as] of Object.entries(NAMED)) if (present(said[name]) && as(said[name])) given[name] = as(said[name]);
  if (device.supply) given.supply = device.supply;
  const fields = {};
  for (const name of OTHER) if (present(said[name])) fields[name] = said[name];
  if (Object.keys(fields).length > 0) given.fields = fields;
  if (instrument) Object.assign(given, givenInstrument(instrument));
  return given;
}

function givenInstrument({ id, accuracy, ramp, calibration_due: due, ...more }) {
  const given = { instrument: id };
  if (accuracy && Object.keys(accuracy).length > 0) given.accuracy = accuracy;
  if (ramp) given.ramp = ramp;
  for (const [name, v] of Object.entries(more)) if (TESTER.includes(name) && present(v)) given[name] = v;
  if (due) given.calibration_due = due;
  return given;
}

/** The body of the record. shown: {result, limit_rev, judge}. */
export function entryBody({ form, given, readings, series, shown, person, note, photos = [], round }) {
  const body = { form: form.form, given, readings };
  if (series.length > 0) body.series = series;
  Object.assign(body, { shown, source: "phone", read_by: person, typed_by: person });
  if (note) body.note = note;
  if (photos.length > 0) body.photos = photos;
  if (round) body.round = round;
  return body;
}

/** What lists show of an own entry before the server has it. numbers: values for the dashed mark. */
export function summaryOf({ entry, device, task, day, result, readings }) {
  const numbers = {};
  for (const [code, r] of Object.entries(readings)) if (typeof r.value === "number") numbers[code] = r.value;
  const answers = {};
  for (const code of ["button_trips", "button_resets"]) if (readings[code]) answers[code] = { value: readings[code].value };
  return { entry, device, task, day, result, numbers, readings: answers };
}
