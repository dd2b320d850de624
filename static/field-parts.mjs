// Small parts every page of the field client uses: the head, the foot with what is kept on the phone, marks of a verdict.

import { html } from "./vendor/htm-preact.mjs";
import { PhoneNotices } from "./phone-notices.mjs";
import { travels } from "./items.mjs";
import { ageWords, showDay } from "./days.mjs";
import { showTag } from "./tag.mjs";

/** Which mark a result or a finding's verdict is drawn with; the word stands beside it always. */
const MARKS = {
  pass: "pass", watch: "watch", "conditional-pass": "watch", "conditional-fail": "watch", fail: "fail",
  incomplete: "none", missing: "none", "not-tested": "none", "not-judged": "none",
};

export const markOf = (verdict) => MARKS[verdict] ?? "none";

const SHAPES = {
  pass: html`<circle cx="5" cy="5" r="5" fill="currentColor" />`,
  watch: html`<path d="M5 0 L10 10 H0Z" fill="currentColor" />`,
  fail: html`<path d="M5 0 L10 5 L5 10 L0 5Z" fill="currentColor" />`,
  none: html`<circle cx="5" cy="5" r="4" fill="none" stroke="currentColor" stroke-width="1.5" stroke-dasharray="2 1.6" />`,
};

/** Word, shape and colour of a verdict. */
export function Mark({ verdict, children }) {
  const mark = markOf(verdict);
  return html`<span class=${`v ${mark}`}><svg viewBox="0 0 10 10" aria-hidden="true">${SHAPES[mark]}</svg><span>${children}</span></span>`;
}

/** Head of a page: where we are, said first. */
export function Where({ app, title, tag, context, progress, back }) {
  return html`<header class="where">
    ${back && html`<div class="line"><a class="back" href=${back}>${app.say("field.back")}</a>${tag && html`<span class="tag">${showTag(tag)}</span>`}</div>`}
    <h1>${title}</h1>
    ${(context || progress) && html`<div class="line quiet"><span>${context}</span><span class="keep">${progress}</span></div>`}
    <${StillOff} app=${app} />
  </header><${Notices} app=${app} />`;
}

/** What is switched off and not reported back on, on every page. */
function StillOff({ app }) {
  return app.off.map((off) => html`<a class="off" href=${off.href} key=${off.href}>
    ${app.say("field.still_off", { what: off.what, since: off.since })}</a>`);
}

function Notices({ app }) {
  const { say, state } = app;
  const minutes = Math.round(Math.abs(state.offset ?? 0) / 60_000);
  return html`<div class="notices"><${PhoneNotices} app=${app} />
    ${Math.abs(state.offset ?? 0) > 120_000 && html`<p class="notice" role="status">${say(state.offset > 0 ? "field.clock_behind" : "field.clock_ahead", { minutes, n: minutes })}</p>`}
    ${state.line === "signed-out" && html`<p class="notice" role="status">${say("field.signed_out")} <a href=${`/in?next=${encodeURIComponent("/field" + (globalThis.location?.hash ?? ""))}`}>${say("field.sign_in")}</a></p>`}
    ${state.line === "trouble" && html`<p class="notice" role="status">${state.said ?? say("field.line.trouble")}</p>`}
    ${state.trouble && html`<p class="notice bad" role="alert">${state.trouble}</p>`}
    ${state.saved && html`<p class=${`saved ${state.saved.result ? markOf(state.saved.result) : ""}`} role="status">${state.saved.result && html`<${Mark} verdict=${state.saved.result}>${say(`verdict.${state.saved.result}`)}<//>`} ${say("field.saved", { what: state.saved.what })}</p>`}</div>`;
}

/** Foot of every page: what is kept on this phone, how old the oldest copy on it is, and the one main button where the page has one. */
export function Foot({ app, children }) {
  const { say, tray } = app;
  const kept = tray.waiting > 0 ? say("field.kept", { n: tray.waiting }) : tray.photos > 0 ? say("photo.kept", { n: tray.photos }) : null;
  const refused = tray.refused > 0 ? say("field.refused_count", { n: tray.refused }) : null;
  return html`<footer class="foot"><a class="tray" href="#/tray">${app.state.line === "unreached" && html`<span>${say("field.no_signal")}</span>`}
    ${refused && html`<b class="bad">${refused}</b>`}${(kept || !refused) && html`<b>${kept ?? say("field.all_sent")}</b>`}${app.state.sites.size > 0 && html`<span>${say("phone.copies", { n: app.state.sites.size, age: ageWords(say, Math.min(...[...app.state.sites.values()].map((s) => s.taken)), app.now()) })}</span>`}</a>${children}</footer>`;
}

/** Context of a device: floor and room, kind, panel and circuit. */
export function contextOf(app, device, place) {
  const where = [place?.building, place?.floor, place?.room].filter((x) => x && x !== place?.name);
  return [...where, app.say(`kind.${device.kind}`), travels(device) ? device.fields?.serial : "", circuitOf(device)].filter(Boolean).map(unbroken).join(" · ");
}

/** A short name is not broken over two lines; a long one may be. */
const unbroken = (text) => (text.length <= 24 ? text.replaceAll(" ", "\u00a0") : text);

export const circuitOf = (device) => [device.panel, device.circuit].filter(Boolean).join(" / ");

/** What a device is called on the phone: the spot it sits in; an item that travels by its make and model, never by where it is
 *  just now; else its kind. */
export function titleOf(app, device, place) {
  return place?.name || (travels(device) && [device.fields?.make, device.fields?.model].filter(Boolean).join(" ")) || app.say(`kind.${device.kind}`);
}

/** "Button test: overdue since Mon 30 Nov". */
export const dueWords = (app, d) => `${app.say(`task.${d.task}`)}: ${dueState(app, d)}`;

/** "overdue since Mon 30 Nov". d: a date of a device's plan. */
export function dueState(app, d) {
  const state = d.state === "upcoming" ? "due" : d.state;
  return app.say(`field.due_state.${state.replaceAll("-", "_")}`, { day: showDay(app, d.due) });
}

/** Where an address leads nowhere on this phone. */
export function LostPage({ app, text }) {
  return html`<${Where} app=${app} title=${text} back="#/" /><main><p class="hint pad">${app.say("field.lost_hint")}</p></main><${Foot} app=${app} />`;
}
