// The first page: the sites on this phone, what is due at each, who makes the entries.

import { html } from "./vendor/htm-preact.mjs";
import { Foot, Where } from "./field-parts.mjs";
import { AlongLine } from "./field-along.mjs";
import { toSite } from "./route.mjs";
import { RoundRows } from "./field-round.mjs";

export function SitesPage({ app }) {
  const { say } = app;
  const sites = app.sites();
  const due = sites.reduce((sum, s) => sum + (s.due ?? 0), 0);
  return html`
    <${Where} app=${app} title=${sitesTitle(app, sites, due)} context=${say("field.sites")} />
    <main>${sites.some((s) => s.taken) && html`<div class="choose"><a class="big" href="#/find"><b>${say("scan.title")}</b></a></div>`}
      <${RoundRows} app=${app} rounds=${app.rounds()} />
      ${app.rounds().length > 0 && html`<section class="room"><h2>${say("field.sites")}</h2></section>`}
      <ul class="rows">${sites.map((s) => html`<li key=${s.log}><a class="row" href=${toSite(s.code)}>
      <span class="name">${s.name}</span><span class="tag">${s.code}</span>
      <span class="quiet">${s.taken ? say("field.site_line", { devices: say("field.devices", { n: s.devices }), due: say("field.due_count", { n: s.due }) }) : say(app.state.busy ? "field.fetching_site" : "field.not_taken")}</span></a></li>`)}</ul>
      ${sites.length === 0 && html`<p class="hint pad">${say(app.state.line === "signed-out" ? "field.no_sites_signed_out" : app.state.busy ? "field.fetching" : "field.no_sites_hint")}</p>`}
      ${sites.length > 0 && html`<${AlongLine} app=${app} />`}
      ${app.state.me.name && html`<p class="who"><span>${say("field.signed_as", { name: app.state.me.name })}</span><a href="#/people">${say("field.somebody_else")}</a></p>`}
    </main><${Foot} app=${app} />`;
}

/** What is due, once every site is here; until then nothing can be called "nothing due". */
function sitesTitle({ say, state }, sites, due) {
  if (due > 0) return say("field.due_here", { n: due });
  if (sites.length > 0 && sites.every((s) => s.taken)) return say("field.nothing_due");
  return say(state.busy ? "field.fetching" : "field.no_sites");
}
