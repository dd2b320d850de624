// A walk through a site: how far it is, a whole room that could not be tested, where to come back, the tester proved at
// both ends, and its end, which is not reached while something is still off.

import { html, useState } from "./vendor/htm-preact.mjs";
import { Foot, Mark, titleOf, Where } from "./field-parts.mjs";
import { Confirm } from "./field-fields.mjs";
import { dueIn, dueNow } from "./list.mjs";
import { backOf, countsOf, nextStop, passedBy, roomMates, roundCounts } from "./walk-round.mjs";
import { TellFirst } from "./field-pass.mjs";
import { ROOM_REASONS } from "./room-locked.mjs";
import { showDay, showMoment } from "./days.mjs";
import { toDevice, toRound, toSite, toTest } from "./route.mjs";

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

/** What a round made in the office is called: its day. */
function roundTitle(app, round) {
  return round.day ? app.say("walk.made_for", { day: showDay(app, round.day) }) : app.say("walk.made");
}

/** Rounds made in the office, as a list of links. rounds: [{site, round}]. */
export function RoundRows({ app, rounds }) {
  const { say } = app;
  return rounds.length > 0 && html`<section class="room rounds"><h2>${say("walk.rounds")}</h2><ul class="rows">${rounds.map(({ site, round }) => html`<li key=${round.id}><a class="row" href=${toRound(site.snapshot.site.code, round.id)}>
    <span class="name">${roundTitle(app, round)}</span><span class="quiet">${app.walking(site)?.id === round.id ? say("walk.begun") : ""}</span>
    <span class="quiet">${[site.snapshot.site.name, round.starts, walkWords(app, roundCounts(round.stops, app.walking(site)?.id === round.id ? app.passed(site) : []))].filter(Boolean).join(" · ")}</span></a></li>`)}</ul></section>`;
}

/** A round made in the office: its note, whom to tell, how far it is, its stops by room, the end. */
function MadeRound({ app, site, round }) {
  const { say } = app, begun = app.walking(site)?.id === round.id, passed = begun ? app.passed(site) : [];
  const counts = roundCounts(round.stops, passed), next = nextStop(round.stops, undefined, passed), blocked = app.off.length > 0;
  const places = round.stops.map((s) => site.places.get(site.device(s.device)?.place));
  const other = !begun && app.walking(site), given = round.stops.filter((s) => s.state === "given").length;
  const go = () => { app.startRound(site, round.id); if (next) app.go(toTest(next.device, next.task)); };
  const end = async () => { if (!blocked && (await app.closeRound(site, counts))) app.go("#/", { keep: true }); };
  const main = !begun ? html`<button type="button" class="big go" onClick=${go}>${say("walk.start")}</button>`
    : next ? html`<a class="big go" href=${toTest(next.device, next.task)}>${say("walk.go_on", { what: titleAt(app, site, next) })}</a>`
    : html`<button type="button" class="big go" aria-disabled=${String(blocked)} disabled=${app.state.saving} onClick=${end}>${say("walk.end")}</button>`;
  return html`<${Where} app=${app} title=${roundTitle(app, round)} context=${site.snapshot.site.name} progress=${[round.starts, round.crew].filter(Boolean).join(" · ")} back="#/" />
    <main><p class="pad counts">${walkWords(app, counts)}</p>
      ${round.note && html`<p class="pad note">${round.note}</p>`}
      ${other && html`<p class="hint pad">${say("walk.other_begun")}</p>`}
      <${TellFirst} app=${app} places=${places} names />
      ${begun && html`<${Proof} app=${app} site=${site} round=${app.roundOf(site)} end="first" />`}
      ${stopsByRoom(site, round.stops).map((g, i) => html`<section class="room" key=${i}><h2>${g.name || say("field.no_place")}</h2><ul class="rows">${g.stops.map((s) => html`<${StopRow} app=${app} site=${site} stop=${s} reason=${passedBy(passed, s)} key=${s.device + s.task} />`)}</ul></section>`)}
      ${begun && html`<${Proof} app=${app} site=${site} round=${app.roundOf(site)} end="last" />`}
      ${(counts.left > 0 || given > 0) && html`<section class="room"><h2>${say("walk.share")}</h2>${counts.left > 0 && html`<ul class="rows"><li><a class="row" href=${`#/hand/${encodeURIComponent(site.snapshot.site.code)}/${round.id}`}><span class="name">${say("walk.hand")}</span></a></li></ul>`}
        <${Given} app=${app} site=${site} n=${given} /></section>`}
      ${blocked && html`<p class="caution" role="alert">${say("walk.still_off", { n: app.off.length })}</p>`}
      ${begun && next && html`<p class="pad"><button type="button" class="link" aria-disabled=${String(blocked)} disabled=${app.state.saving} onClick=${end}>${say("walk.end_with", { n: counts.left })}</button></p>`}
    </main><${Foot} app=${app}>${main}<//>`;
}

function titleAt(app, site, stop) {
  const device = site.device(stop.device);
  return device ? titleOf(app, device, site.places.get(device.place)) : app.say("walk.unknown");
}

/** Stops under their rooms, in the order of the round. */
function stopsByRoom(site, stops) {
  const groups = [];
  for (const stop of stops) {
    const place = site.places.get(site.device(stop.device)?.place), name = [place?.building, place?.floor, place?.room].filter(Boolean).join(" · ");
    if (groups.at(-1)?.name !== name) groups.push({ name, stops: [] });
    groups.at(-1).stops.push(stop);
  }
  return groups;
}

function StopRow({ app, site, stop, reason }) {
  const { say } = app, last = site.device(stop.device)?.last?.[stop.task];
  const state = stop.state === "done" ? html`<${Mark} verdict=${last?.result ?? "pass"}>${say(`verdict.${last?.result ?? "pass"}`)}<//>`
    : stop.state === "given" ? html`<${Mark} verdict="not-tested">${say("walk.stop_given")}<//>`
    : stop.state === "back" ? html`<${Mark} verdict="watch">${say("walk.stop_back")}<//>`
    : reason ? html`<${Mark} verdict="not-tested">${say(`walk.passed.${reason}`)}<//>` : null;
  return html`<li><a class="row" href=${toTest(stop.device, stop.task)}><span class="name">${titleAt(app, site, stop)}</span><span class="quiet">${say(`task.${stop.task}`)}</span>${state}</a>
    ${reason && html`<button type="button" class="link under" onClick=${() => app.passOver(site, stop, null)}>${say("walk.walk_it")}</button>`}</li>`;
}

/** The round of a site: one made in the office where the address names it, else a walk through all that is due today. */
export function RoundPage({ app, site, tag: id }) {
  const made = id && app.roundsOf(site).find((r) => r.id === id);
  if (made) return html`<${MadeRound} app=${app} site=${site} round=${made} />`;
  return html`<${DayWalk} app=${app} site=${site} />`;
}

/** Counts of the day, the tester first and last, the list to come back to, the end. */
function DayWalk({ app, site }) {
  const { say } = app;
  const round = app.roundOf(site), counts = countsOf(site, app.skipped(site)), back = backOf(site);
  const off = app.off.length, blocked = off > 0;
  const end = async () => {
    if (blocked) return;
    if (await app.closeRound(site, counts)) app.go(toSite(site.snapshot.site.code), { keep: true });
  };
  const row = (d) => html`<li key=${d.id}><a class="row" href=${toDevice(d.id)}><span class="name">${titleOf(app, d, site.places.get(d.place))}</span><span></span>
    <span class="quiet">${[site.places.get(d.place)?.room, ...dueNow(d, site.today).map((x) => say(`task.${x.task}`))].filter(Boolean).join(" · ")}</span></a></li>`;
  const over = dueIn(site).filter((d) => round.skipped.includes(d.id)), given = dueIn(site).filter((d) => round.given?.includes(d.id));
  const code = encodeURIComponent(site.snapshot.site.code);
  return html`<${Where} app=${app} title=${say("walk.round")} context=${site.snapshot.site.name} progress=${showDay(app, site.today)} back=${toSite(site.snapshot.site.code)} />
    <main><p class="pad counts">${walkWords(app, counts)}</p>
      <${Proof} app=${app} site=${site} round=${round} end="first" />
      ${back.length > 0 && html`<section class="room"><h2>${say("walk.come_back", { n: back.length })}</h2><ul class="rows">${back.slice(0, 100).map(row)}</ul></section>`}
      ${over.length > 0 && html`<section class="room"><h2>${say("walk.passed_over", { n: over.length })}</h2><ul class="rows">${over.slice(0, 100).map(row)}</ul>
        <button type="button" class="big more" onClick=${() => app.unskip(site)}>${say("walk.walk_again")}</button></section>`}
      <section class="room"><h2>${say("walk.share")}</h2><ul class="rows">
        ${counts.left > 0 && html`<li><a class="row" href=${`#/hand/${code}`}><span class="name">${say("walk.hand")}</span></a></li>`}
        <li><a class="row" href=${`#/take/${code}`}><span class="name">${say("walk.take")}</span></a></li></ul>
        <${Given} app=${app} site=${site} n=${given.length} /></section>
      <${Proof} app=${app} site=${site} round=${round} end="last" />
      ${blocked && html`<p class="caution" role="alert">${say("walk.still_off", { n: off })}</p>`}
      ${!blocked && (!round.proved?.first || !round.proved?.last) && html`<p class="hint pad">${say("walk.unproved")}</p>`}
    </main><${Foot} app=${app}><button type="button" class="big go" aria-disabled=${String(blocked)} disabled=${app.state.saving} onClick=${end}>${say("walk.end")}</button><//>`;
}

/** What a colleague walks, and the way back. */
const Given = ({ app, site, n }) => n > 0 && html`<p class="beside pad"><span>${app.say("walk.given", { n })}</span><button type="button" class="link" onClick=${() => app.giveAway(site, [])}>${app.say("walk.take_back")}</button></p>`;

/** A tester is proved on an outlet known to be live, before the first test and after the last. */
function Proof({ app, site, round, end }) {
  const { say } = app;
  const at = round.proved?.[end];
  return html`<section class="ask"><span class="q">${say(`walk.prove_${end}`)}</span>
    ${at ? html`<p class="beside"><${Mark} verdict=${at.works ? "pass" : "fail"}>${say(at.works ? "walk.proved" : "walk.not_proved", { when: showMoment(app, at.at) })}<//><button type="button" class="link" onClick=${() => app.prove(site, end, null)}>${say("walk.again")}</button></p>`
      : html`<p class="hint">${say("walk.prove_hint")}</p><div class="pair"><button type="button" onClick=${() => app.prove(site, end, true)}>${say("walk.works")}</button><button type="button" onClick=${() => app.prove(site, end, false)}>${say("walk.works_not")}</button></div>`}
    ${at && !at.works && html`<p class="bad">${say(`walk.bad_${end}`)}</p>`}</section>`;
}
