// The order of a form: which questions are put now, which step is closed and why, what is still open. It decides nothing
// about limits (judge.mjs does). Pure.

import { plainValue, readAnswer } from "./answer.mjs";
import { seriesAnswers } from "./draft.mjs";

/** What stands where nothing is said: a test made with no stated waveform was made with a sine. */
const UNSAID = { waveform: "ac" };

/** Cautions that would only be noise elsewhere. */
const CAUTION_WHEN = {
  no_power: [{ reading: "found", is: ["no-power", "tripped"] }],
  isolated_monitor: [{ field: "supply", is: "isolated" }],
  isolated_lamps: [{ field: "supply", is: "isolated" }],
};

const listed = (want, value) => (Array.isArray(want) ? want : [want]).includes(value);

/** Whether one condition of a `when` holds; every part it states must. A missing value satisfies `missing` and `not` only. */
export function holds(c, readings, fields) {
  const value = c.reading !== undefined ? plainValue(readings[c.reading]) ?? UNSAID[c.reading] : fields[c.field];
  if (c.missing && value !== undefined) return false;
  if (c.is !== undefined && (value === undefined || !listed(c.is, value))) return false;
  if (c.not !== undefined && value !== undefined && listed(c.not, value)) return false;
  if (c.at_least === undefined && c.at_most === undefined && c.above === undefined && c.below === undefined) return true;
  return typeof value === "number" && (c.at_least === undefined || value >= c.at_least) && (c.at_most === undefined || value <= c.at_most)
    && (c.above === undefined || value > c.above) && (c.below === undefined || value < c.below);
}

export const allHold = (conditions, readings, fields) => (conditions ?? []).every((c) => holds(c, readings, fields));

/** What a condition may name beside readings: the device's fields as `given` carries them, over what the limit set assumes. */
export const fieldsOf = (given, assume) => ({ ...assume, ...given.fields, ...given });

/**
 * Walks a form with a draft's answers. Returns
 *   steps: [{step, cautions, closed, asks, series}] with only what applies now; closed is the words key of the reason or null;
 *     series is [{at, asks, answered}] where the step asks the same readings under stated conditions,
 *   open: required questions without a readable answer or reason, as {id, ask} (id of the row on the page),
 *   broken: ids of rows whose answer cannot be read,
 *   ended: the reading whose answer ended the form, readings: code → reading, series: rows for the record.
 * An answer counts only while its question applies, so one left behind by a changed mind is not recorded.
 */
export function walk(form, draft, given, assume) {
  const fields = fieldsOf(given, assume);
  const out = { steps: [], open: [], broken: [], ended: null, readings: {}, series: [] };
  let before = null;
  for (const step of form.steps) {
    const shown = { step: step.step, cautions: (step.cautions ?? []).filter((c) => allHold(CAUTION_WHEN[c], out.readings, fields)), closed: closedText(step, out.readings, fields), asks: [], series: [] };
    if (!shown.closed) {
      putAsks(form, step, draft, fields, shown, out);
      if (!out.ended && form.series?.step === step.step) putSeries(form, step, draft, fields, shown, out);
    }
    // A step without questions only tells what to do after the one before it.
    if (shown.closed || shown.asks.length > 0 || shown.series.length > 0 || (step.asks.length === 0 && before && !before.closed)) out.steps.push(shown);
    if (out.ended) break;
    before = shown;
  }
  out.open = out.open.filter(({ ask }) => !(ask.or && out.readings[ask.or]));
  return out;
}

function putAsks(form, step, draft, fields, shown, out) {
  for (const ask of step.asks) {
    if (ask.series && !plainly(form, ask, out.readings, fields)) continue;
    if (!allHold(ask.when, out.readings, fields)) continue;
    shown.asks.push(ask);
    const { reading, error } = readAnswer(ask, draft.answers[ask.reading]);
    if (error) out.broken.push(ask.reading);
    if (reading) out.readings[ask.reading] = reading;
    else if (ask.required) out.open.push({ id: ask.reading, ask });
    if (reading && (ask.ends ?? []).includes(plainValue(reading))) {
      out.ended = ask.reading;
      return;
    }
  }
}

/** A reading that belongs to a series is put once, plainly, where none of its conditions applies (one face only). */
function plainly(form, ask, readings, fields) {
  const conditions = (form.series?.conditions ?? []).filter((c) => c.any_of.includes(ask.reading));
  return conditions.length > 0 && !conditions.some((c) => allHold(c.when, readings, fields));
}

function putSeries(form, step, draft, fields, shown, out) {
  for (const condition of form.series.conditions) {
    if (!allHold(condition.when, out.readings, fields)) continue;
    const asks = step.asks.filter((a) => a.series && condition.any_of.includes(a.reading) && allHold(a.when, { ...out.readings, ...valuesOf(condition.at) }, fields));
    if (asks.length === 0) continue;
    shown.series.push({ at: condition.at, asks });
    const answers = seriesAnswers(draft, condition.at);
    const row = { at: condition.at };
    for (const ask of asks) {
      const { reading, error } = readAnswer(ask, answers[ask.reading]);
      if (error) out.broken.push(rowId(condition.at, ask));
      if (reading) row[ask.reading] = reading;
    }
    if (Object.keys(row).length > 1) out.series.push(row);
    else out.open.push({ id: rowId(condition.at, asks[0]), ask: asks[0], at: condition.at });
  }
}

const valuesOf = (at) => Object.fromEntries(Object.entries(at).map(([k, value]) => [k, { value }]));

/** The id of a row on the page, for a reading under conditions. */
export const rowId = (at, ask) => `${ask.reading}-${Object.values(at).join("-").replace(/[^\w-]/g, "_")}`;

/** Words key of why a step is closed, null when it is open. */
function closedText(step, readings, fields) {
  const shut = (step.closed_when ?? []).some((c) => holds(c, readings, fields)) || !allHold(step.closed_unless, readings, fields);
  return shut ? step.closed_text ?? "caution.closed_inject" : null;
}

/** Answers of the one-tap button form: exactly what the form states, and nothing else. */
export function quickAnswers(form) {
  return Object.fromEntries(Object.entries(form.quick.readings).map(([code, value]) => [code, { pick: value }]));
}

/** A draft with one reason for every open question: the room is locked, the circuit is dead. */
export function fillMissing(walked, draft, reason) {
  const answers = { ...draft.answers };
  let series = draft.series;
  for (const { ask, at } of walked.open) {
    if (!at) answers[ask.reading] = { missing: reason };
    else series = [...series.filter((row) => rowId(row.at, ask) !== rowId(at, ask)), { at, answers: { [ask.reading]: { missing: reason } } }];
  }
  return { answers, series };
}
