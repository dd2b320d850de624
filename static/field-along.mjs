// What is on this phone: which sites, how old each copy is, and whether the phone will keep it.

import { html } from "./vendor/htm-preact.mjs";
import { Foot, Where } from "./field-parts.mjs";
import { ageWords, showMoment } from "./days.mjs";
import { isChosen } from "./taking.mjs";

const HOURS = 3_600_000;

export function AlongPage({ app }) {
  const { say, state } = app;
  const sites = app.sites(), here = sites.filter((s) => s.taken);
  return html`<${Where} app=${app} title=${say("phone.along_title", { n: here.length })} context=${say("phone.along")} back="#/" />
    <main>
      <ul class="rows">${sites.map((s) => html`<li key=${s.log}><label class="row still pick"><span class="name">${s.name}</span><input type="checkbox" checked=${isChosen(state.me, s.log)} onChange=${(e) => app.chooseSite(s.log, e.currentTarget.checked)} />
        <span class="quiet">${s.taken ? `${say("field.devices", { n: s.devices })} · ${ageWords(say, s.taken, app.now())}, ${showMoment(app, s.taken)}` : say(isChosen(state.me, s.log) ? "field.not_taken" : "phone.left_behind")}</span>
        ${s.taken && app.now() - s.taken > 24 * HOURS && html`<span class="bad">${say("phone.old")}</span>`}</label></li>`)}</ul>
      <p class="hint pad">${say("phone.along_hint")}</p>
      <p class="hint pad">${state.persisted === undefined ? say("phone.asking") : say(state.persisted ? "phone.persistent" : "field.not_persistent")}</p>
    </main><${Foot} app=${app} />`;
}

/** The way to that page, with what a person wants to know before the signal goes. */
export function AlongLine({ app }) {
  const { say } = app, here = app.sites().filter((s) => s.taken);
  if (here.length === 0) return html`<p class="along"><a href="#/along">${say("phone.along")}</a></p>`;
  const oldest = Math.min(...here.map((s) => s.taken));
  return html`<p class="along"><a href="#/along">${say("phone.along_line", { n: here.length, age: ageWords(say, oldest, app.now()) })}</a></p>`;
}
