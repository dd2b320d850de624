// The pages that lead to a test: sites, the devices of a site in walking order, one device, and what the tray holds.

import { html, useState } from "./vendor/htm-preact.mjs";
import { circuitOf, contextOf, Foot, Mark, titleOf, Where } from "./field-parts.mjs";
import { dueNow, grouped, matches } from "./list.mjs";
import { showDay, showMoment } from "./days.mjs";
import { toDevice, toSite, toTest } from "./route.mjs";
import { showTag } from "./tag.mjs";

const PAGEFUL = 150; // rows drawn at once; a phone draws these in a blink, five thousand it does not

export function SitesPage({ app }) {
  const { say } = app;
  const sites = app.sites();
  const due = sites.reduce((sum, s) => sum + (s.due ?? 0), 0);
  return html`
    <${Where} app=${app} title=${sitesTitle(app, sites, due)} context=${say("field.sites")} />
    <main><ul class="rows">${sites.map((s) => html`<li key=${s.log}><a class="row" href=${toSite(s.code)}>
      <span class="name">${s.name}</span><span class="tag">${s.code}</span>
      <span class="quiet">${s.taken ? say("field.site_line", { devices: say("field.devices", { n: s.devices }), due: say("field.due_count", { n: s.due }) }) : say(app.state.busy ? "field.fetching_site" : "field.not_taken")}</span></a></li>`)}</ul>
      ${sites.length === 0 && html`<p class="hint pad">${say(app.state.line === "signed-out" ? "field.no_sites_signed_out" : app.state.busy ? "field.fetching" : "field.no_sites_hint")}</p>`}
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
  const [all, setAll] = useState(false);
  const [typed, setTyped] = useState("");
  const [most, setMost] = useState(PAGEFUL);
  const due = site.devices.filter((d) => dueNow(d, site.today).length > 0);
  const searching = typed.trim() !== "";
  const shown = (all || searching ? site.devices : due).filter((d) => matches(d, site.places.get(d.place), typed, say(`kind.${d.kind}`)));
  return html`
    <${Where} app=${app} title=${due.length > 0 ? say("field.due_here", { n: due.length }) : say("field.nothing_due")} tag=${null}
      context=${site.snapshot.site.name} progress=${say("field.as_of", { when: showMoment(app, site.taken) })} back="#/" />
    <main>
      <div class="filter">
        <label class="find"><span class="unseen">${say("field.search")}</span><input type="search" value=${typed} placeholder=${say("field.search")} autocomplete="off" onInput=${(e) => { setTyped(e.currentTarget.value); setMost(PAGEFUL); }} /></label>
        <div class="pair" role="group" aria-label=${say("field.which")}>
          <button type="button" aria-pressed=${String(!all && !searching)} onClick=${() => { setAll(false); setTyped(""); }}>${say("field.filter_due", { n: due.length })}</button>
          <button type="button" aria-pressed=${String(all || searching)} onClick=${() => setAll(true)}>${say("field.filter_all", { n: site.devices.length })}</button></div>
      </div>
      ${grouped(shown.slice(0, most), site.places).map((g) => html`<section key=${g.name} class="room"><h2>${g.name || say("field.no_place")}</h2>
        <ul class="rows">${g.devices.map(({ device, place }) => html`<${DeviceRow} app=${app} key=${device.id} device=${device} place=${place} today=${site.today} />`)}</ul></section>`)}
      ${shown.length === 0 && html`<p class="hint pad">${say(searching ? "field.nothing_found" : "field.nothing_due_hint")}</p>`}
      ${shown.length > most && html`<button type="button" class="big more" onClick=${() => setMost(most + PAGEFUL)}>${say("field.show_more", { n: Math.min(PAGEFUL, shown.length - most) })}</button>`}
    </main><${Foot} app=${app} />`;
}

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
      ${place?.critical_load && html`<p class="caution"><b>${say("field.critical_load", { load: place.critical_load })}</b></p>`}
      <div class="choose">${forms.map((f) => html`<a class=${due.has(f.task) ? "big go" : "big"} key=${f.form} href=${toTest(device.id, f.task)}>
        <b>${say(`task.${f.task}`)}</b><span>${due.has(f.task) ? stateWords(app, due.get(f.task)) : say("field.not_due")}</span></a>`)}
        ${forms.length === 0 && html`<p class="hint">${say("field.no_form")}</p>`}</div>
      <section class="past"><h2>${say("field.last_tests")}</h2>
        ${Object.keys(device.last ?? {}).length === 0 ? html`<p class="hint pad">${say("field.never_tested")}</p>` : html`<ul class="rows">${Object.entries(device.last).map(([task, l]) => html`<li key=${task} class="row still">
          <span class="name">${say(`task.${task}`)}</span><${Mark} verdict=${l.result}>${say(`verdict.${l.result}`)}<//>
          <span class="quiet">${showDay(app, l.day)}${l.own ? ` · ${say(l.unsent ? "field.own_unsent" : "field.own_sent")}` : ""}</span></li>`)}</ul>`}
      </section>
      <p class="facts quiet">${[[device.fields?.make, device.fields?.model].filter(Boolean).join(" "), ...facts, device.fields?.equipment_ground === "none-permitted" ? say("field.fact.no_ground") : "", device.supply === "isolated" ? say("field.fact.isolated") : ""].filter(Boolean).join(" · ")}</p>
    </main><${Foot} app=${app} />`;
}

/** What this phone keeps: what waits, what the server refused and why. */
export function TrayPage({ app }) {
  const { say, state } = app;
  const waiting = state.records.filter((r) => r.state === "waiting"), refused = state.records.filter((r) => r.state === "refused");
  const line = (r) => html`<li class="row still" key=${r.id}><span class="name">${r.summary?.title ?? r.id}</span>
    ${r.summary && html`<${Mark} verdict=${r.summary.result}>${say(`verdict.${r.summary.result}`)}<//>`}
    <span class="quiet">${r.summary ? `${say(`task.${r.summary.task}`)} · ` : ""}${showMoment(app, r.saved)}</span>
    ${r.state === "refused" && html`<span class="bad">${r.receipt?.text || say(r.receipt?.code === "too_large" ? "field.refused_too_large" : "field.refused_no_text")}</span>`}</li>`;
  return html`
    <${Where} app=${app} title=${waiting.length > 0 ? say("field.kept", { n: waiting.length }) : refused.length > 0 ? say("field.refused_count", { n: refused.length }) : say("field.all_sent")} context=${say("field.tray")} back="#/" />
    <main>
      ${waiting.length > 0 && html`<p class="hint pad">${say(`field.line.${state.line}`)}</p><button type="button" class="big more" onClick=${app.sendNow}>${say("field.send_now")}</button><ul class="rows">${waiting.map(line)}</ul>`}
      ${refused.length > 0 && html`<section class="room"><h2>${say("field.refused_title")}</h2><p class="hint pad">${say("field.refused_hint")}</p><ul class="rows">${refused.map(line)}</ul></section>`}
      ${state.persisted === false && html`<p class="hint pad">${say("field.not_persistent")}</p>`}
    </main><${Foot} app=${app} />`;
}

/** Where an address leads nowhere on this phone. */
export function LostPage({ app, text }) {
  return html`<${Where} app=${app} title=${text} back="#/" /><main><p class="hint pad">${app.say("field.lost_hint")}</p></main><${Foot} app=${app} />`;
}
