// The devices of a site in walking order: what is due, search, the label's code.

import { html, useEffect, useState } from "./vendor/htm-preact.mjs";
import { circuitOf, dueWords, Foot, titleOf, Where } from "./field-parts.mjs";
import { dueIn, dueNow, grouped, matches } from "./list.mjs";
import { showMoment } from "./days.mjs";
import { toDevice } from "./route.mjs";
import { showTag } from "./tag.mjs";
import { pageRead, tagTyped } from "./tag-typed.mjs";
import { Camera } from "./field-scan.mjs";
import { openDefects } from "./defect-work.mjs";
import { DefectMark } from "./field-failed.mjs";
import { ItemsHere } from "./field-item.mjs";
import { travels } from "./items.mjs";
import { RoundRows, walkWords } from "./field-round.mjs";
import { backOf, countsOf } from "./walk-round.mjs";

const FIRST = 24, SLICE = 42; // rows of the first picture, which fill any screen; the rest of a page follows in slices, so that a tap never waits
const PAGEFUL = 150; // rows of a page; more are asked for

export function DevicesPage({ app, site }) {
  const { say } = app;
  const [all, setAll] = useState(() => (app.taken(site).size > 0 ? "taken" : "due"));
  const [scan, setScan] = useState(false);
  const [typed, setTyped] = useState("");
  const [most, setMost] = useState(PAGEFUL), [drawn, setDrawn] = useState(FIRST);
  const due = dueIn(site), back = backOf(site), mine = app.taken(site), taken = due.filter((d) => mine.has(d.id));
  const searching = typed.trim() !== "", { error } = tagTyped(typed), code = site.snapshot.site.code;
  const shown = (searching || all === "all" ? site.devices : all === "back" ? back : all === "taken" && taken.length > 0 ? taken : due).filter((d) => matches(d, site.places.get(d.place), typed, say(`kind.${d.kind}`)));
  const rows = shown.slice(0, Math.min(most, drawn));
  useEffect(() => {
    if (rows.length >= Math.min(most, shown.length)) return undefined;
    const timer = setTimeout(() => setDrawn(drawn + SLICE), 16);
    return () => clearTimeout(timer);
  });
  return html`
    <${Where} app=${app} title=${due.length > 0 ? say("field.due_here", { n: due.length }) : say("field.nothing_due")} tag=${null}
      context=${site.snapshot.site.name} progress=${say("field.as_of", { when: showMoment(app, site.taken) })} back="#/" />
    <main>
      <p class="beside pad counts"><span>${walkWords(app, countsOf(site, app.skipped(site)))}</span><a href=${`#/round/${encodeURIComponent(code)}`}>${say("walk.round")}</a></p>
      <${RoundRows} app=${app} rounds=${app.roundsOf(site).map((round) => ({ site, round }))} />
      <div class="filter">
        ${scan && html`<${Camera} app=${app} read=${pageRead} onTag=${(page) => app.go(page)} onClose=${() => setScan(false)} />`}
        <div class="beside"><label class="find"><span class="unseen">${say("field.search")}</span><input type="search" value=${typed} placeholder=${say("field.search")} autocomplete="off" aria-invalid=${error ? "true" : null} onInput=${(e) => { setTyped(e.currentTarget.value); setMost(PAGEFUL); }} /></label>
          ${!scan && html`<button type="button" class="big" onClick=${() => setScan(true)}>${say("scan.scan")}</button>`}</div>
        ${error && html`<p class="bad" role="alert">${say(error)}</p>`}
        <div class=${back.length > 0 || taken.length > 0 ? "pair three" : "pair"} role="group" aria-label=${say("field.which")}>
          <button type="button" aria-pressed=${String(all === "due" && !searching)} onClick=${() => { setAll("due"); setTyped(""); }}>${say("field.filter_due", { n: due.length })}</button>
          ${taken.length > 0 && html`<button type="button" aria-pressed=${String(all === "taken" && !searching)} onClick=${() => { setAll("taken"); setTyped(""); }}>${say("walk.filter_taken", { n: taken.length })}</button>`}
          ${back.length > 0 && html`<button type="button" aria-pressed=${String(all === "back" && !searching)} onClick=${() => { setAll("back"); setTyped(""); }}>${say("walk.filter_back", { n: back.length })}</button>`}
          <button type="button" aria-pressed=${String(all === "all" || searching)} onClick=${() => setAll("all")}>${say("field.filter_all", { n: site.devices.length })}</button></div>
      </div>
      ${grouped(rows, site.places).map((g) => html`<section key=${g.name} class="room"><h2 class="beside"><span>${g.name || say("field.no_place")}</span>${roomDue(g, site.today) > 1 && html`<a class="small" href=${`#/room/${encodeURIComponent(code)}/${g.devices[0].device.id}`}>${say("walk.room_link")}</a>`}</h2>
        <ul class="rows">${g.devices.map(({ device, place }) => html`<${DeviceRow} app=${app} key=${device.id} device=${device} place=${place} today=${site.today} />`)}</ul></section>`)}
      ${shown.length === 0 && html`<p class="hint pad">${say(error ? "scan.check_hint" : searching ? "field.nothing_found" : "field.nothing_due_hint")}</p>`}
      ${shown.length > most && rows.length === most && html`<button type="button" class="big more" onClick=${() => setMost(most + PAGEFUL)}>${say("field.show_more", { n: Math.min(PAGEFUL, shown.length - most) })}</button>`}
      ${!searching && html`<${ItemsHere} app=${app} site=${site} />`}
      <p class="pad"><a href=${`#/add/${encodeURIComponent(code)}`}>${say("register.add")}</a></p>
    </main><${Foot} app=${app} />`;
}

const roomDue = (g, today) => g.devices.filter(({ device }) => device.place && dueNow(device, today).length > 0).length;

function DeviceRow({ app, device, place, today }) {
  const { say } = app;
  const due = dueNow(device, today);
  return html`<li><a class="row" href=${toDevice(device.id)}>
    <span class="name">${titleOf(app, device, place)}</span>${device.tag ? html`<span class="tag">${showTag(device.tag)}</span>` : html`<span></span>`}
    <span class="quiet">${[say(`kind.${device.kind}`), circuitOf(device), awayAt(app, device)].filter(Boolean).join(" · ")}</span>
    ${due.map((d) => html`<span class=${`due ${d.state}`} key=${d.task}>${dueWords(app, d)}</span>`)}
    ${openDefects(device).map((d) => html`<${DefectMark} app=${app} defect=${d} key=${d.id} />`)}
  </a></li>`;
}

/** Where an item of this depot is, when it is at another site. */
function awayAt(app, device) {
  const at = travels(device) && device.fields?.at_site;
  return at ? app.say("item.at", { site: app.sites().find((s) => s.log === at)?.name ?? app.say("item.unseen_site") }) : "";
}
