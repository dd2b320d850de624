// The order of a form: which questions are put now, which step is closed and why, what is still open. Conditions and
// limits are decided by facts.mjs and judge.mjs, the same as on the server; nothing is decided here. Pure.

import { readAnswer } from "./answer.mjs";
import { seriesAnswers } from "./draft.mjs";
import { Facts } from "./facts.mjs";

/** Cautions that would only be noise elsewhere. */
const CAUTION_WHEN = {
  no_power: [{ reading: "found", is: ["no-power", "tripped"] }],
  plug_in_lamp: [{ field: "kind", not: "gfci-breaker" }],
  lamps_limits: [{ field: "supply", not: "isolated" }, { field: "no_neutral", not: "yes" }],
  breaker_loads_off: [{ field: "kind", is: "gfci-breaker" }],
  breaker_reset: [{ field: "kind", is: "gfci-breaker" }],
  portable_power: [{ field: "kind", is: "portable-gfci" }],
  isolated_monitor: [{ field: "supply", is: "isolated" }],
  isolated_lamps: [{ field: "supply", is: "isolated" }],
};

/**
 * Walks a form with a draft's answers. limitSet may be null. Returns
 *   steps: [{step, cautions, closed, asks, series}] with only what applies now; closed is the words key of the reason or null;
 *     series is [{at, asks}] where the step asks the same readings under stated conditions,
 *   open: required and expected questions without a readable answer or reason, as {id, ask, at},
 *   broken: ids of rows whose answer cannot be read,
 *   ended: the reading whose answer ended the form, readings: code → reading, series: rows for the record.
 * An answer counts only while its question applies, so one left behind by a changed mind is not recorded; a condition sees
 * only what was answered before it, as the tester does.
 */
export function walk(form, draft, given, limitSet) {
  const out = { steps: [], open: [], broken: [], ended: null, readings: {}, series: [] };
  const facts = new Facts(form, limitSet ?? { limits: [] }, { given, readings: out.readings, series: [] });
  let before = null;
  for (const step of form.steps) {
    const shown = { step: step.step, cautions: (step.cautions ?? []).filter((c) => facts.all(CAUTION_WHEN[c])), closed: facts.closed(step) ? step.closed_text ?? "caution.closed_inject" : null, asks: [], series: [] };
    if (step.proves) Object.assign(shown, { proves: step.proves, proves_not: step.proves_not });
    if (!shown.closed) {
      putAsks(form, step, draft, facts, shown, out);
      if (!out.ended && form.series?.step === step.step) putSeries(form, step, draft, facts, shown, out);
    }
    // A step without questions only tells what to do after the one before it.
    if (shown.closed || shown.asks.length > 0 || shown.series.length > 0 || (step.asks.length === 0 && before && !before.closed)) out.steps.push(shown);
    if (out.ended) break;
    before = shown;
  }
  const tapped = tappedOnce(form, out.readings);
  out.open = out.open.filter(({ ask, at }) => at || !((ask.or && isSaid(out.readings[ask.or])) || (tapped && !ask.required)));
  return out;
}

/** Whether all that the one tap states is answered as it states: then nothing merely expected is open. */
const tappedOnce = (form, readings) => form.quick !== undefined && Object.entries(form.quick.readings).every(([code, value]) => readings[code]?.value === value);

const isSaid = (reading) => reading !== undefined && reading.missing === undefined;

function putAsks(form, step, draft, facts, shown, out) {
  for (const ask of step.asks) {
    if (!facts.asked(ask) || (ask.series && !plainly(form, ask, facts))) continue;
    shown.asks.push(ask);
    const { reading, error } = readAnswer(ask, draft.answers[ask.reading]);
    if (error) out.broken.push(ask.reading);
    if (reading) out.readings[ask.reading] = reading;
    else if (ask.required || ask.expected) out.open.push({ id: ask.reading, ask });
    if (reading && (ask.ends ?? []).includes(reading.value)) {
      out.ended = ask.reading;
      return;
    }
  }
}

/** A reading that belongs to a series is put once, plainly, where none of its conditions applies (one face only). */
function plainly(form, ask, facts) {
  const conditions = (form.series?.conditions ?? []).filter((c) => c.any_of.includes(ask.reading));
  return conditions.length > 0 && !conditions.some((c) => facts.all(c.when));
}

function putSeries(form, step, draft, facts, shown, out) {
  for (const condition of form.series.conditions) {
    if (!facts.all(condition.when)) continue;
    const asks = step.asks.filter((a) => a.series && condition.any_of.includes(a.reading) && facts.asked(a));
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

/** The id of a row on the page, for a reading under conditions. */
export const rowId = (at, ask) => `${ask.reading}-${Object.values(at).join("-").replace(/[^\w-]/g, "_")}`;

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
