// Correcting an own entry: its readings put back into a draft, and the body of the correction, which carries all of them
// anew with a reason. Pure.

import { newDraft } from "./draft.mjs";

export const correctionKey = (entry) => `correct|${entry}`;

/** record: the entry.made as this phone keeps it; newer: body of its newest own correction, if any. */
export function correctionDraft({ record, newer, task, now }) {
  const made = JSON.parse(record), said = newer ?? made.body;
  const draft = newDraft({ device: made.subject, task, log: made.log, form: made.body.form, instrument: made.body.given?.instrument, now });
  const answers = Object.fromEntries(Object.entries(said.readings).map(([code, r]) => [code, answerOf(r)]));
  const series = (said.series ?? []).map(({ at, ...rest }) => ({ at, answers: Object.fromEntries(Object.entries(rest).map(([code, r]) => [code, answerOf(r)])) }));
  return { ...draft, key: correctionKey(made.id), corrects: made.id, made_at: Date.parse(made.at), detailed: true, answers, series, reason: "" };
}

/** What a draft keeps of a reading that was recorded: the other way round from readAnswer. */
export function answerOf(r) {
  if (r === null || typeof r !== "object") return typeof r === "number" ? { typed: String(r) } : { pick: String(r) };
  if (r.missing !== undefined) return { missing: r.missing };
  const unit = r.unit ? { unit: r.unit } : {};
  if (r.no_trip) return { typed: "", gave_up: true };
  if (r.above !== undefined) return { typed: r.typed ?? String(r.above), ...unit, gave_up: true };
  if (r.below !== undefined) return { typed: `<${r.typed ?? r.below}`, ...unit };
  return typeof r.value === "number" ? { typed: r.typed ?? String(r.value), ...unit } : { pick: String(r.value) };
}

/** Body of entry.corrected. */
export function correctionBody({ draft, readings, series, given, was }) {
  const body = { entry: draft.corrects, readings };
  if (series.length > 0) body.series = series;
  if (JSON.stringify(given.instrument ?? null) !== JSON.stringify(was ?? null)) body.given = given;
  return { ...body, reason: draft.reason.trim() };
}
