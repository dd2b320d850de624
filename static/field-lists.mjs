// The pages that lead to a test: sites, the devices of a site in walking order, one device.

import { html, useState } from "./vendor/htm-preact.mjs";
import { circuitOf, contextOf, Foot, Mark, titleOf, Where } from "./field-parts.mjs";
import { AlongLine } from "./field-along.mjs";
import { dueNow, grouped, matches } from "./list.mjs";
import { showDay, showMoment } from "./days.mjs";
import { toDevice, toSite, toTest } from "./route.mjs";
import { showTag } from "./tag.mjs";
import { tagTyped } from "./tag-typed.mjs";
import { Camera } from "./field-scan.mjs";
import { CriticalLoads, ResetsAt } from "./field-dark.mjs";
import { walkWords } from "./field-round.mjs";
import { toReturn, walkCounts } from "./walk-round.mjs";

const PAGEFUL = 150; // rows drawn at once; a phone draws these in a blink, five thousand it does not

export function SitesPage({ app }) {
  const { say } = app;
  const sites = app.sites();
  const due = sites.reduce((sum, s) => sum + (s.due ?? 0), 0);
  return html`
    <${Where} app=${app} title=${sitesTitle(app, sites, due)} context=${say("field.sites")} />
    <main>${sites.some((s) => s.taken) && html`<div class="choose"><a class="big" href="#/find"><b>${say("scan.title")}</b></a></div>`}
      <ul class="rows">${sites.map((s) => html`<li key=${s.log}><a class="row" href=${toSite(s.code)}>
      <span class="name">${s.name}</span><span class="tag">${s.code}</span>
      <span class="quiet">${s.taken ? say("field.site_line", { devices: say("field.devices", { n: s.devices }), due: say("field.due_count", { n: s.due }) }) : say(app.state.busy ? "field.fetching_site" : "field.not_taken")}</span></a></li>`)}</ul>
      ${sites.length === 0 && html`<p class="hint pad">${say(app.state.line === "signed-out" ? "field.no_sites_signed_out" : app.state.busy ? "field.fetching" : "field.no_sites_hint")}</p>`}
      ${sites.length > 0 && html`<${AlongLine} app=${app} />`}
      ${app.state.me.name && html`<p class="who"><span>${say("field.signed_as", { name: app.state.me.name })}</span><button type="button" onClick=${app.somebodyElse}>${say("field.somebody_else")}</button></p>`}
    </main><${Foot} app=${app} />`;
}

/** What is due, once every site is here; until then nothing can be called "nothing due". */
function sitesTitle({ say, state }, sites, due) {
  if (due > 0) return say("field.due_here", { n: due });
  if (sites.length > 0 && sites.every((s) => s.taken)) return say("field.nothing_due");
  return say(state.busy ? "field.fetching" : "field.no_sites");
}

export function DevicesPage({ app, site }) {
  const { say } = app;
  const [all, setAll] = useState("due");
  const [scan, setScan] = useState(false);
  const [typed, setTyped] = useState("");
  const [most, setMost] = useState(PAGEFUL);
  const due = site.devices.filter((d) => dueNow(d, site.today).length > 0);
  const back = toReturn(site.devices, site.today);
  const searching = typed.trim() !== "", { error } = tagTyped(typed), code = site.snapshot.site.code;
  const shown = (searching || all === "all" ? site.devices : all === "back" ? back : due).filter((d) => matches(d, site.places.get(d.place), typed, say(`kind.${d.kind}`)));
  return html`
    <${Where} app=${app} title=${due.length > 0 ? say("field.due_here", { n: due.length }) : say("field.nothing_due")} tag=${null}
      context=${site.snapshot.site.name} progress=${say("field.as_of", { when: showMoment(app, site.taken) })} back="#/" />
    <main>
      <p class="beside pad counts"><span>${walkWords(app, walkCounts(site.devices, site.today, app.skipped(site)))}</span><a href=${`#/round/${encodeURIComponent(code)}`}>${say("walk.round")}</a></p>
      <div class="filter">
        ${scan && html`<${Camera} app=${app} onTag=${(tag) => app.go(`#tag=${tag}`)} onClose=${() => setScan(false)} />`}
        <div class="beside"><label class="find"><span class="unseen">${say("field.search")}</span><input type="search" value=${typed} placeholder=${say("field.search")} autocomplete="off" aria-invalid=${error ? "true" : null} onInput=${(e) => { setTyped(e.currentTarget.value); setMost(PAGEFUL); }} /></label>
          ${!scan && html`<button type="button" class="big" onClick=${() => setScan(true)}>${say("scan.scan")}</button>`}</div>
        ${error && html`<p class="bad" role="alert">${say(error)}</p>`}
        <div class=${back.length > 0 ? "pair three" : "pair"} role="group" aria-label=${say("field.which")}>
          <button type="button" aria-pressed=${String(all === "due" && !searching)} onClick=${() => { setAll("due"); setTyped(""); }}>${say("field.filter_due", { n: due.length })}</button>
          ${back.length > 0 && html`<button type="button" aria-pressed=${String(all === "back" && !searching)} onClick=${() => { setAll("back"); setTyped(""); }}>${say("walk.filter_back", { n: back.length })}</button>`}
          <button type="button" aria-pressed=${String(all === "all" || searching)} onClick=${() => setAll("all")}>${say("field.filter_all", { n: site.devices.length })}</button></div>
      </div>
      ${grouped(shown.slice(0, most), site.places).map((g) => html`<section key=${g.name} class="room"><h2 class="beside"><span>${g.name || say("field.no_place")}</span>${roomDue(g, site.today) > 1 && html`<a class="small" href=${`#/room/${encodeURIComponent(code)}/${g.devices[0].device.id}`}>${say("walk.room_link")}</a>`}</h2>
        <ul class="rows">${g.devices.map(({ device, place }) => html`<${DeviceRow} app=${app} key=${device.id} device=${device} place=${place} today=${site.today} />`)}</ul></section>`)}
      ${shown.length === 0 && html`<p class="hint pad">${say(error ? "scan.check_hint" : searching ? "field.nothing_found" : "field.nothing_due_hint")}</p>`}
      ${shown.length > most && html`<button type="button" class="big more" onClick=${() => setMost(most + PAGEFUL)}>${say("field.show_more", { n: Math.min(PAGEFUL, shown.length - most) })}</button>`}
      <p class="pad"><a href=${`#/add/${encodeURIComponent(code)}`}>${say("register.add")}</a></p>
    </main><${Foot} app=${app} />`;
}

const roomDue = (g, today) => g.devices.filter(({ device }) => device.place && dueNow(device, today).length > 0).length;

function DeviceRow({ app, device, place, today }) {
  const { say } = app;
  const due = dueNow(device, today);
  return html`<li><a class="row" href=${toDevice(device.id)}>
    <span class="name">${titleOf(app, device, place)}</span>${device.tag ? html`<span class="tag">${showTag(device.tag)}</span>` : html`<span></span>`}
    <span class="quiet">${[say(`kind.${device.kind}`), circuitOf(device)].filter(Boolean).join(" · ")}</span>
    ${due.map((d) => html`<span class=${`due ${d.state}`} key=${d.task}>${dueWords(app, d)}</span>`)}
    ${failedTasks(device).map((task) => html`<${Mark} verdict="fail" key=${task}>${say("field.last_failed", { task: say(`task.${task}`), day: showDay(app, device.last[task].day) })}<//>`)}
  </a></li>`;
}

const failedTasks = (device) => Object.keys(device.last ?? {}).filter((t) => device.last[t].result === "fail");

/** "Button test: overdue since Mon 30 Nov". */
const dueWords = (app, d) => `${app.say(`task.${d.task}`)}: ${stateWords(app, d)}`;

function stateWords(app, d) {
  const state = d.state === "upcoming" ? "due" : d.state;
  return app.say(`field.due_state.${state.replaceAll("-", "_")}`, { day: showDay(app, d.due) });
}

export function DevicePage({ app, site, device, place }) {
  const { say } = app;
  const due = new Map(dueNow(device, site.today).map((d) => [d.task, d]));
  const forms = app.formsFor(site, device).sort((a, b) => Number(due.has(b.task)) - Number(due.has(a.task)));
  const facts = [["rated_residual_ma", "mA"], ["rating_a", "A"], ["nominal_v", "V"]].filter(([f]) => device.fields?.[f]).map(([f, u]) => say(`field.fact.${f}`, { value: device.fields[f], unit: u }));
  return html`
    <${Where} app=${app} title=${titleOf(app, device, place)} tag=${device.tag} context=${contextOf(app, device, place)} back=${toSite(site.snapshot.site.code)} />
    <main>
      <${CriticalLoads} app=${app} site=${site} device=${device} />
      <${ResetsAt} app=${app} device=${device} />
      <div class="choose">${forms.map((f) => html`<a class=${due.has(f.task) ? "big go" : "big"} key=${f.form} href=${toTest(device.id, f.task)}>
        <b>${say(`task.${f.task}`)}</b><span>${due.has(f.task) ? stateWords(app, due.get(f.task)) : say("field.not_due")}</span></a>`)}
        ${forms.length === 0 && html`<p class="hint">${say("field.no_form")}</p>`}</div>
      <section class="past"><h2>${say("field.last_tests")}</h2>
        ${Object.keys(device.last ?? {}).length === 0 ? html`<p class="hint pad">${say("field.never_tested")}</p>` : html`<ul class="rows">${Object.entries(device.last).map(([task, l]) => html`<li key=${task} class="row still">
          <span class="name">${say(`task.${task}`)}</span><${Mark} verdict=${l.result}>${say(`verdict.${l.result}`)}<//>
          <span class="quiet">${showDay(app, l.day)}${l.own ? ` · ${say(l.unsent ? "field.own_unsent" : "field.own_sent")}` : ""}</span>
          ${app.state.own.has(l.entry) && l.result && html`<a class="small" href=${`#/correct/${l.entry}`}>${say("correct.link")}</a>`}</li>`)}</ul>`}
      </section>
      <p class="facts quiet">${[[device.fields?.make, device.fields?.model].filter(Boolean).join(" "), ...facts, device.fields?.equipment_ground === "none-permitted" ? say("field.fact.no_ground") : "", device.supply === "isolated" ? say("field.fact.isolated") : ""].filter(Boolean).join(" · ")}</p>
      <${Work} app=${app} site=${site} device=${device} forms=${forms} />
    </main><${Foot} app=${app} />`;
}

/** What else may be done at a device. */
function Work({ app, site, device, forms }) {
  const { say } = app, feeds = app.feeds(site, device);
  const trips = forms.some((f) => f.steps.some((s) => s.asks.some((a) => a.reading === "button_trips")));
  const link = (page, words, more) => html`<li><a class="row" href=${`#/${page}/${device.id}`}><span class="name">${say(words)}</span>${more && html`<span class="quiet">${more}</span>`}</a></li>`;
  return html`<section class="room"><h2>${say("register.work")}</h2><ul class="rows">
    ${trips && link("dark", "dark.title", feeds.length > 0 ? say("dark.feeds", { n: feeds.length }) : say("dark.feeds_unknown"))}
    ${link("label", device.tag ? "register.not_this" : "register.bind")}
    ${device.place && link("move", "register.move")}
    ${link("replace", "replace.title")}</ul></section>`;
}

/** Where an address leads nowhere on this phone. */
export function LostPage({ app, text }) {
  return html`<${Where} app=${app} title=${text} back="#/" /><main><p class="hint pad">${app.say("field.lost_hint")}</p></main><${Foot} app=${app} />`;
}
