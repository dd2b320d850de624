// Correcting an entry of one's own: the same form with what was recorded in it, and the reason.

import { html, useEffect, useState } from "./vendor/htm-preact.mjs";
import { Foot, Where } from "./field-parts.mjs";
import { TestPage } from "./field-test.mjs";

export function CorrectPage({ app, entry }) {
  const [lost, setLost] = useState(null);
  useEffect(() => { app.openCorrection(entry).then(setLost, () => setLost("correct.not_here")); }, [entry]);
  const test = app.correction(entry);
  if (test) return html`<${TestPage} app=${app} test=${test} key=${test.draft.key} />`;
  return html`<${Where} app=${app} title=${app.say(lost ?? "field.starting")} back="#/" />
    <main>${lost && html`<p class="hint pad">${app.say(`${lost}_hint`)}</p>`}</main><${Foot} app=${app} />`;
}

/** Why it is changed; asked before it can be kept. */
export function Reason({ app, draft }) {
  return html`<section class="ask" id="ask-reason"><label class="q" for="reason">${app.say("correct.reason")}</label>
    <textarea id="reason" rows="2" value=${draft.reason} onInput=${(e) => app.reason(draft, e.currentTarget.value)}></textarea><p class="hint">${app.say("correct.hint")}</p></section>`;
}
