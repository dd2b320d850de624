// What a tester has switched off and not yet reported as back on. A draft whose TEST button "went off" counts until the
// form's question about power being back is answered. Pure.

/** Questions that say whether power is back. Only those put after the TEST button count: an earlier RESET brought back
 *  something else. */
const BACK = new Set(["button_resets", "restored"]);

/** The questions of a walked form that say whether power is back, in their order. */
export function backQuestions(walked) {
  const asks = walked.steps.flatMap((s) => s.asks);
  const pressed = asks.findIndex((a) => a.reading === "button_trips");
  return pressed < 0 ? [] : asks.slice(pressed + 1).filter((a) => BACK.has(a.reading));
}

/** Whether a draft leaves something off: the button was pressed, power went off, and nothing since says it is back or
 *  that it does not come back. */
export function leavesOff(draft, walked) {
  if (draft.answers.button_trips?.pick !== "yes") return false;
  return !backQuestions(walked).some((a) => draft.answers[a.reading]?.pick || draft.answers[a.reading]?.missing);
}

/** Drafts that leave something off, oldest first: [{device, task, since}]. walkOf(draft) walks its form, or gives null. */
export function stillOff(drafts, walkOf) {
  return drafts
    .filter((d) => { const walked = walkOf(d); return walked && leavesOff(d, walked); })
    .map((d) => ({ device: d.device, task: d.task, since: d.off_since ?? d.started }))
    .sort((a, b) => a.since - b.since);
}
