// A walk through a site: how far it is, a whole room that could not be tested, where to come back, the tester proved at
// both ends, and its end, which is not reached while something is still off.

import { html, useState } from "./vendor/htm-preact.mjs";
import { Foot, Mark, titleOf, Where } from "./field-parts.mjs";
import { Confirm } from "./field-fields.mjs";
import { dueIn, dueNow } from "./list.mjs";
import { backOf, countsOf, roomMates } from "./walk-round.mjs";
import { ROOM_REASONS } from "./room-locked.mjs";
import { showDay, showMoment } from "./days.mjs";
import { toDevice, toSite } from "./route.mjs";

/** "12 done · 30 left · 2 passed over · 1 to come back to". */
export function walkWords(app, counts) {
  return ["done", "left", "skipped", "back"].filter((k) => counts[k] > 0 || k === "left").map((k) => app.say(`walk.${k}`, { n: counts[k] })).join(" · ");
}

/** One reason for all that is due in a room. */
export function RoomPage({ app, site, device }) {
  const { say } = app;
  const mates = roomMates(site, device).filter((d) => dueNow(d, site.today).length > 0);
  const [reason, setReason] = useState(null);
  const [left, setLeft] = useState(() => new Set());
  const chosen = mates.filter((d) => !left.has(d.id));
  const place = site.places.get(device.place);
  const name = [place?.floor, place?.room].filter(Boolean).join(" · ") || say("field.no_place");
  const back = toSite(site.snapshot.site.code);
  const keep = async () => {
    if (!reason || chosen.length === 0) return;
    if (await app.keepLocked(site, chosen, reason, name)) app.go(back, { keep: true });
  };
  return html`<${Where} app=${app} title=${name} context=${site.snapshot.site.name} back=${back} />
    <main><h2 class="task">${say("walk.room")}</h2>
      <section class="ask"><span class="q" id="q-reason">${say("walk.reason")}</span><div class="pick" role="group" aria-labelledby="q-reason">${ROOM_REASONS.map((r) => html`<button type="button" key=${r} aria-pressed=${String(reason === r)} onClick=${() => setReason(r)}>${say(`missing.${r}`)}</button>`)}</div>
        <p class="hint">${say("walk.room_hint")}</p></section>
      ${mates.map((d) => html`<div class="pad" key=${d.id}><${Confirm} done=${!left.has(d.id)} set=${(on) => setLeft(new Set(on ? [...left].filter((x) => x !== d.id) : [...left, d.id]))}>${titleOf(app, d, site.places.get(d.place))}<//></div>`)}
      ${mates.length === 0 && html`<p class="hint pad">${say("field.nothing_due_hint")}</p>`}
    </main><${Foot} app=${app}><button type="button" class="big go" aria-disabled=${String(!reason || chosen.length === 0)} disabled=${app.state.saving} onClick=${keep}>${say("walk.keep_room", { n: chosen.length })}</button><//>`;
}

/** The round of a site: counts, the tester first and last, the list to come back to, the end. */
export function RoundPage({ app, site }) {
  const { say } = app;
  const round = app.roundOf(site), counts = countsOf(site, app.skipped(site)), back = backOf(site);
  const off = app.off.length, blocked = off > 0;
  const end = async () => {
    if (blocked) return;
    if (await app.closeRound(site, counts)) app.go(toSite(site.snapshot.site.code), { keep: true });
  };
  const row = (d) => html`<li key=${d.id}><a class="row" href=${toDevice(d.id)}><span class="name">${titleOf(app, d, site.places.get(d.place))}</span><span></span>
    <span class="quiet">${[site.places.get(d.place)?.room, ...dueNow(d, site.today).map((x) => say(`task.${x.task}`))].filter(Boolean).join(" · ")}</span></a></li>`;
  const skipped = app.skipped(site), over = dueIn(site).filter((d) => skipped.has(d.id));
  return html`<${Where} app=${app} title=${say("walk.round")} context=${site.snapshot.site.name} progress=${showDay(app, site.today)} back=${toSite(site.snapshot.site.code)} />
    <main><p class="pad counts">${walkWords(app, counts)}</p>
      <${Proof} app=${app} site=${site} round=${round} end="first" />
      ${back.length > 0 && html`<section class="room"><h2>${say("walk.come_back", { n: back.length })}</h2><ul class="rows">${back.slice(0, 100).map(row)}</ul></section>`}
      ${over.length > 0 && html`<section class="room"><h2>${say("walk.passed_over", { n: over.length })}</h2><ul class="rows">${over.slice(0, 100).map(row)}</ul>
        <button type="button" class="big more" onClick=${() => app.unskip(site)}>${say("walk.walk_again")}</button></section>`}
      <${Proof} app=${app} site=${site} round=${round} end="last" />
      ${blocked && html`<p class="caution" role="alert">${say("walk.still_off", { n: off })}</p>`}
      ${!blocked && (!round.proved?.first || !round.proved?.last) && html`<p class="hint pad">${say("walk.unproved")}</p>`}
    </main><${Foot} app=${app}><button type="button" class="big go" aria-disabled=${String(blocked)} disabled=${app.state.saving} onClick=${end}>${say("walk.end")}</button><//>`;
}

/** A tester is proved on an outlet known to be live, before the first test and after the last. */
function Proof({ app, site, round, end }) {
  const { say } = app;
  const at = round.proved?.[end];
  return html`<section class="ask"><span class="q">${say(`walk.prove_${end}`)}</span>
    ${at ? html`<p class="beside"><${Mark} verdict=${at.works ? "pass" : "fail"}>${say(at.works ? "walk.proved" : "walk.not_proved", { when: showMoment(app, at.at) })}<//><button type="button" class="link" onClick=${() => app.prove(site, end, null)}>${say("walk.again")}</button></p>`
      : html`<p class="hint">${say("walk.prove_hint")}</p><div class="pair"><button type="button" onClick=${() => app.prove(site, end, true)}>${say("walk.works")}</button><button type="button" onClick=${() => app.prove(site, end, false)}>${say("walk.works_not")}</button></div>`}
    ${at && !at.works && html`<p class="bad">${say(`walk.bad_${end}`)}</p>`}</section>`;
}
