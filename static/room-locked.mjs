// One reason for everything: the entry of a device nothing could be tested at. Pure.

import { newDraft } from "./draft.mjs";
import { fillMissing, walk } from "./flow.mjs";
import { givenOf } from "./entry.mjs";
import { judgeWalked } from "./judging.mjs";

/** Reasons one may give for a whole room. */
export const ROOM_REASONS = ["no-access", "circuit-dead", "unsafe", "other"];

/** answers: what was seen all the same, like found no power. Gives {given, readings, series, verdict}. */
export function lockedEntry({ device, form, limitSet, reason, answers = {} }) {
  const given = givenOf({ device, form, limitSet, instrument: null });
  let draft = { ...newDraft({ device: device.id, task: form.task, log: "", form: form.form, now: 0 }), answers };
  let walked = walk(form, draft, given, limitSet);
  for (let again = 0; walked.open.length > 0 && again < 12; again++) { // a reason may open a further question
    draft = { ...draft, ...fillMissing(walked, draft, reason) };
    walked = walk(form, draft, given, limitSet);
  }
  return { given, readings: walked.readings, series: walked.series, verdict: judgeWalked({ form, limitSet, given }, walked) };
}
