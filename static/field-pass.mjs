// Going past an outlet without a test, and what must be known before TEST is pressed at a place.

import { html, useState } from "./vendor/htm-preact.mjs";
import { toRound, toTest } from "./route.mjs";
import { tellFirst } from "./walk-round.mjs";

/** Why somebody goes past a test of a round; it stays due. */
export const PASS_REASONS = ["in-use", "outside-window", "nobody-there", "no-time", "other"];

/** On to the next outlet without an entry; this one stays due and is counted as passed over. On a round somebody made, with a reason. */
export function PassOver({ app, test }) {
  const { say } = app, { site, device, form, next } = test;
  const [asked, setAsked] = useState(false);
  const on = () => app.go(next ? toTest(next.device, next.task) : toRound(site.snapshot.site.code, test.onRound?.id));
  const pass = () => { app.skip(site, device); on(); };
  const passWith = (reason) => { app.passOver(site, { device: device.id, task: form.task }, reason); on(); };
  if (!test.onRound) return html`<p class="pad"><button type="button" class="link" onClick=${pass}>${say("walk.skip")}</button></p>`;
  if (!asked) return html`<p class="pad"><button type="button" class="link" onClick=${() => setAsked(true)}>${say("walk.skip")}</button></p>`;
  return html`<section class="ask" id="pass-over"><span class="q" id="q-pass">${say("walk.why_passed")}</span>
    <div class="pick" role="group" aria-labelledby="q-pass">${PASS_REASONS.map((r) => html`<button type="button" key=${r} onClick=${() => passWith(r)}>${say(`walk.passed.${r}`)}</button>`)}</div></section>`;
}

/** "Pantry: only between 06:00 and 08:30. Tell first: Nurse in charge." names: with the names of the places. */
export function TellFirst({ app, places, names = false }) {
  const { say } = app, list = tellFirst(places).filter((o) => names || o.who || o.from);
  return list.length > 0 && html`<div class="caution tell">${list.map((o, i) => html`<p key=${i}>${names && html`<b>${o.names.join("; ")}:</b> `}${[
    o.from && say("walk.window", { from: o.from, until: o.until }), o.who && say("walk.tell", { who: o.who }), names && o.load && say("field.critical_load", { load: o.load })].filter(Boolean).join(" ")}</p>`)}</div>`;
}
