// A draft is one test being filled in. Every keystroke makes a new draft, which is kept at once. Pure.

export const draftKey = (device, task) => `${device}|${task}`;

/** An empty draft of a device's test. now: ms. */
export function newDraft({ device, task, log, form, instrument, now }) {
  return { key: draftKey(device, task), device, task, log, form, started: now, changed: now, answers: {}, series: [], note: "", instrument: instrument ?? null };
}

/** Whether anything has been said in it. */
export function isTouched(draft) {
  return Boolean(draft.note) || (draft.photos ?? []).length > 0 || Object.keys(draft.answers).length > 0 || draft.series.some((row) => Object.keys(row.answers ?? {}).length > 0);
}

/** A draft with all its answers replaced. The moment the power went off is remembered with it. */
export const withAnswers = (draft, answers, now) => stamped({ ...draft, answers }, now);

/** A draft with one answer of a row of its series set. at: the row's conditions. */
export function withSeries(draft, at, code, answer, now) {
  const key = conditionKey(at);
  const rows = draft.series.filter((row) => conditionKey(row.at) !== key);
  const answers = { ...draft.series.find((row) => conditionKey(row.at) === key)?.answers };
  if (answer === undefined) delete answers[code];
  else answers[code] = answer;
  return stamped({ ...draft, series: [...rows, { at, answers }] }, now);
}

function stamped(draft, now) {
  const off = draft.answers.button_trips?.pick === "yes";
  return { ...draft, changed: now, off_since: off ? draft.off_since ?? now : undefined };
}

/** One text for a set of conditions, whatever order they were written in. */
export const conditionKey = (at) => Object.keys(at).sort().map((k) => `${k}=${at[k]}`).join(",");

/** The answers of one row of a series. */
export const seriesAnswers = (draft, at) => draft.series.find((row) => conditionKey(row.at) === conditionKey(at))?.answers ?? {};
