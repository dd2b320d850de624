// One device: its tests, what was found last, and what else may be done there.

import { html } from "./vendor/htm-preact.mjs";
import { contextOf, dueState, Foot, Mark, titleOf, Where } from "./field-parts.mjs";
import { dueNow } from "./list.mjs";
import { showDay } from "./days.mjs";
import { toSite, toTest } from "./route.mjs";
import { behind } from "./protection-map.mjs";
import { openDefects } from "./defect-work.mjs";
import { Defects } from "./field-failed.mjs";
import { WhereItIs } from "./field-item.mjs";
import { travels } from "./items.mjs";
import { CriticalLoads, ResetsAt } from "./field-dark.mjs";

export function DevicePage({ app, site, device, place }) {
  const { say } = app;
  const due = new Map(dueNow(device, site.today).map((d) => [d.task, d]));
  const forms = app.formsFor(site, device).sort((a, b) => Number(due.has(b.task)) - Number(due.has(a.task)));
  const facts = [["rated_residual_ma", "mA"], ["rating_a", "A"], ["nominal_v", "V"]].filter(([f]) => device.fields?.[f]).map(([f, u]) => say(`field.fact.${f}`, { value: device.fields[f], unit: u }));
  return html`
    <${Where} app=${app} title=${titleOf(app, device, place)} tag=${device.tag} context=${contextOf(app, device, place)} back=${toSite(site.snapshot.site.code)} />
    <main>
      <${Defects} app=${app} device=${device} />
      <${LostPhotos} app=${app} device=${device} />
      ${openDefects(device).length > 0 && html`<div class="choose"><a class="big" href=${`#/failed/${device.id}`}><b>${say("failed.link")}</b><span>${say("failed.link_hint")}</span></a></div>`}
      <${WhereItIs} app=${app} site=${site} device=${device} />
      <${CriticalLoads} app=${app} site=${site} device=${device} />
      <${ResetsAt} app=${app} device=${device} />
      <div class="choose">${forms.map((f) => html`<a class=${due.has(f.task) ? "big go" : "big"} key=${f.form} href=${toTest(device.id, f.task)}>
        <b>${say(`task.${f.task}`)}</b><span>${due.has(f.task) ? dueState(app, due.get(f.task)) : say("field.not_due")}</span></a>`)}
        ${forms.length === 0 && html`<p class="hint">${say("field.no_form")}</p>`}</div>
      <section class="past"><h2>${say("field.last_tests")}</h2>
        ${Object.keys(device.last ?? {}).length === 0 ? html`<p class="hint pad">${say("field.never_tested")}</p>` : html`<ul class="rows">${Object.entries(device.last).map(([task, l]) => html`<li key=${task} class="row still">
          <span class="name">${say(`task.${task}`)}</span><${Mark} verdict=${l.result}>${say(`verdict.${l.result}`)}<//>
          <span class="quiet">${showDay(app, l.day)}${l.own ? ` · ${say(l.unsent ? "field.own_unsent" : "field.own_sent")}` : ""}</span>
          ${l.entry && l.result && (app.state.own.has(l.entry) || app.state.line !== "unreached") && html`<a class="small" href=${`#/correct/${l.entry}`}>${say("correct.link")}</a>`}</li>`)}</ul>`}
      </section>
      <p class="facts quiet">${[[device.fields?.make, device.fields?.model].filter(Boolean).join(" "), ...facts, device.fields?.equipment_ground === "none-permitted" ? say("field.fact.no_ground") : "", device.supply === "isolated" ? say("field.fact.isolated") : ""].filter(Boolean).join(" · ")}</p>
      <${Work} app=${app} site=${site} device=${device} forms=${forms} />
    </main><${Foot} app=${app} />`;
}

/** Photos of this device's tests that the server did not take: a defect without its picture is told here, not only in the tray. */
function LostPhotos({ app, device }) {
  const { say, state } = app, tests = new Set(Object.values(device.last ?? {}).map((l) => l.entry));
  const lost = (state.refusedPhotos ?? []).filter((p) => tests.has(p.entry) || state.records.some((r) => r.id === p.entry && r.summary?.device === device.id));
  return lost.map((p) => html`<p class="bad pad" key=${p.sha256}>${p.text ? say("photo.refused_there", { text: p.text }) : say("photo.refused_no_text")} <a href="#/tray">${say("photo.refused_look")}</a></p>`);
}

/** What else may be done at a device. */
function Work({ app, site, device, forms }) {
  const { say } = app, feeds = behind(site.devices, device);
  const trips = forms.some((f) => f.steps.some((s) => s.asks.some((a) => a.reading === "button_trips")));
  const link = (page, words, more) => html`<li><a class="row" href=${`#/${page}/${device.id}`}><span class="name">${say(words)}</span>${more && html`<span class="quiet">${more}</span>`}</a></li>`;
  return html`<section class="room"><h2>${say("register.work")}</h2><ul class="rows">
    ${trips && link("dark", "dark.title", feeds.length > 0 ? say("dark.feeds", { n: feeds.length }) : say("dark.feeds_unknown"))}
    ${link("label", device.tag ? "register.not_this" : "register.bind")}
    ${device.place && link("move", "register.move")}
    ${travels(device) && link("bring", "item.title")}
    ${link("flaw", "flaw.title")}
    ${link("replace", "replace.title")}</ul></section>`;
}
