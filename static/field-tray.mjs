// What this phone keeps: what waits, what the server refused and why, what a branch holds, and the ways out of each.

import { html } from "./vendor/htm-preact.mjs";
import { Foot, Mark, Where } from "./field-parts.mjs";
import { showMoment } from "./days.mjs";
import { doubted } from "./heads.mjs";
import { isReadable } from "./rescue.mjs";

const SHOWN = 100; // rows of what waits; a month without signal has thousands, and all of them are counted

export function TrayPage({ app }) {
  const { say, state } = app;
  const { waiting, refused, held } = sorted(state.records), shots = state.refusedPhotos ?? [];
  return html`
    <${Where} app=${app} title=${title(say, waiting, refused.length + shots.length)} context=${say("field.tray")} back="#/" />
    <main>
      ${waiting.length > 0 && html`<p class="hint pad">${say(`field.line.${state.line}`)}</p><p class="hint pad">${say("phone.oldest", { when: showMoment(app, waiting[0].saved) })}</p>
        <button type="button" class="big more" onClick=${app.sendNow}>${say("field.send_now")}</button><ul class="rows">${waiting.slice(0, SHOWN).map((r) => html`<${TrayRow} app=${app} row=${r} key=${r.id} />`)}</ul>
        ${waiting.length > SHOWN && html`<p class="hint pad">${say("phone.and_more", { n: waiting.length - SHOWN })}</p>`}`}
      ${refused.length > 0 && html`<section class="room"><h2>${say("field.refused_title")}</h2><p class="hint pad">${say("phone.refused_ways")}</p>
        <ul class="rows">${refused.map((r) => html`<${TrayRow} app=${app} row=${r} key=${r.id} />`)}</ul></section>`}
      ${shots.length > 0 && html`<section class="room"><h2>${say("photo.refused_title")}</h2><p class="hint pad">${say("photo.refused_hint")}</p>
        <ul class="rows">${shots.map((p) => html`<${ShotRow} app=${app} photo=${p} key=${p.sha256} />`)}</ul></section>`}
      ${held.length > 0 && html`<section class="room"><h2>${say("phone.held", { n: held.length })}</h2><p class="hint pad">${say("phone.held_hint")}</p><ul class="rows">${held.map((r) => html`<${TrayRow} app=${app} row=${r} key=${r.id} />`)}</ul></section>`}
      ${doubted(state.me).map((d) => html`<${Doubted} app=${app} doubt=${d} key=${d.log} />`)}
      <section class="room"><h2>${say("phone.rescue")}</h2><p class="hint pad">${say("phone.rescue_hint")}</p><button type="button" class="big more" onClick=${app.saveTray}>${say("phone.rescue_go")}</button></section>
      <p class="hint pad">${state.persisted === undefined ? say("phone.asking") : say(state.persisted ? "phone.persistent" : "field.not_persistent")}</p>
    </main><${Foot} app=${app} />`;
}

/** A log of the server's that does not go on from what this phone knew of it. */
function Doubted({ app, doubt }) {
  const { say, state } = app, log = state.me.logs?.find((l) => l.log === doubt.log);
  return html`<section class="room"><h2>${say("phone.book_of", { what: log?.name ?? say("phone.book_org") })}</h2>
    <p class="hint pad">${say("phone.book_was", { known: doubt.known, count: doubt.size, when: showMoment(app, doubt.at) })} ${say(doubt.told ? "phone.book_told" : "phone.book_not_told")}</p>
    <p class="hint pad">${say("phone.book_do")}</p><button type="button" class="big more" onClick=${() => app.goOn(doubt.log)}>${say("phone.book_go_on")}</button></section>`;
}

const sorted = (records) => ({
  waiting: records.filter((r) => r.state === "waiting").sort((a, b) => a.saved - b.saved), refused: records.filter((r) => r.state === "refused"),
  held: records.filter((r) => r.state === "sent" && r.receipt?.state === "held"),
});

function title(say, waiting, refused) {
  if (waiting.length > 0) return say("field.kept", { n: waiting.length });
  return refused > 0 ? say("field.refused_count", { n: refused }) : say("field.all_sent");
}

function TrayRow({ app, row: r }) {
  const { say } = app;
  return html`<li class="row still"><span class="name">${r.summary?.title ?? r.fact?.title ?? r.id}</span>
    ${r.summary?.result && html`<${Mark} verdict=${r.summary.result}>${say(`verdict.${r.summary.result}`)}<//>`}
    <span class="quiet">${wrote(say, r)}${showMoment(app, r.saved)}</span>
    ${r.state === "refused" && html`<span class="bad">${refusal(say, r)}</span>
      <span class="ways">${isReadable(r) && html`<button type="button" onClick=${() => app.sayAgain(r)}>${say("phone.say_again")}</button> `}<button type="button" onClick=${() => app.handOver(r)}>${say("phone.hand_over")}</button></span>`}</li>`;
}

/** A photo the server did not take, with its sentence. */
function ShotRow({ app, photo: p }) {
  const { say } = app, row = app.state.records.find((r) => r.id === p.entry);
  return html`<li class="row still"><span class="name">${row?.summary?.title ?? say("photo.alt")}</span><span class="quiet">${showMoment(app, p.saved)}</span>
    <span class="bad">${p.text || say("photo.refused_no_text")}</span>
    <span class="ways"><button type="button" onClick=${() => app.handOverPhoto(p.sha256)}>${say("phone.hand_over")}</button></span></li>`;
}

/** Why the server did not take a record; bytes that were damaged here are said so, whatever the server made of them. */
function refusal(say, r) {
  if (!isReadable(r)) return say("field.refused_damaged");
  return r.receipt?.text || say(r.receipt?.code === "too_large" ? "field.refused_too_large" : "field.refused_no_text");
}

/** What kind of record it is, in front of when it was made. */
function wrote(say, { summary, fact }) {
  if (summary?.task) return `${say(summary.corrects ? "correct.title" : `task.${summary.task}`, { task: say(`task.${summary.task}`) })} · `;
  return fact ? `${say(`register.wrote.${fact.kind.replace(".", "_")}`)} · ` : "";
}

/** Where a phone's browser would lose what is kept in a plain tab. */
export function HomeScreenPage({ say }) {
  return html`<header class="where"><h1>${say("phone.home_title")}</h1></header><main>
    <p class="pad">${say("phone.home_why")}</p><ol class="pad"><li>${say("phone.home_share")}</li><li>${say("phone.home_add")}</li><li>${say("phone.home_open")}</li><li>${say("phone.home_sign_in")}</li></ol></main>`;
}
