// Turns a finished draft into the body of an entry.made record: the facts, what the judgement needs to know of the
// device and the instrument, and what this phone told the tester. Pure.

/** Register fields of a device that have a name of their own in `given`. */
const NAMED = ["rated_residual_ma", "equipment_ground", "rating_a", "nominal_v", "delayed", "faces", "waveform"];
/** Further register fields a limit's or a form's condition may name. */
const OTHER = ["length_m", "gauge"];

/** An instrument of the snapshot, whichever way its names are written. */
export function readInstrument(raw) {
  const get = (a, b) => raw[a] ?? raw[b];
  return {
    id: get("id", "ID"), name: get("name", "Name"), serial: get("serial", "Serial"), retired: get("retired", "Retired"),
    accuracy: get("accuracy", "Accuracy"), ramp: get("ramp", "Ramp"), calibration_due: get("calibration_due", "CalibrationDue"),
  };
}

/** What the judgement needs beside the readings. instrument may be null. */
export function givenOf({ device, form, limitSet, instrument }) {
  const given = { kind: device.kind, form_rev: form.revision };
  if (limitSet) Object.assign(given, { limit_set: limitSet.limit_set, limit_rev: limitSet.revision });
  for (const name of NAMED) if (present(device.fields?.[name])) given[name] = device.fields[name];
  if (device.supply) given.supply = device.supply;
  const fields = {};
  for (const name of OTHER) if (present(device.fields?.[name])) fields[name] = device.fields[name];
  if (Object.keys(fields).length > 0) given.fields = fields;
  if (instrument) {
    given.instrument = instrument.id;
    if (instrument.accuracy && Object.keys(instrument.accuracy).length > 0) given.accuracy = instrument.accuracy;
    if (instrument.ramp) given.ramp = instrument.ramp;
    if (instrument.calibration_due) given.calibration_due = instrument.calibration_due;
  }
  return given;
}

const present = (v) => v !== undefined && v !== null && v !== "";

/** The body of the record. shown: {result, limit_rev, judge}. */
export function entryBody({ form, given, readings, series, shown, person, note }) {
  const body = { form: form.form, given, readings };
  if (series.length > 0) body.series = series;
  Object.assign(body, { shown, source: "phone", read_by: person, typed_by: person });
  if (note) body.note = note;
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
