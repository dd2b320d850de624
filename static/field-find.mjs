// Finding a device: by its label, typed or scanned, by its place or its circuit, over all sites on the phone; and what to
// do with a label nobody has bound yet.

import { html, useState } from "./vendor/htm-preact.mjs";
import { circuitOf, Foot, titleOf, Where } from "./field-parts.mjs";
import { TagTaker } from "./field-scan.mjs";
import { matches } from "./list.mjs";
import { toDevice } from "./route.mjs";
import { parseTag, showTag } from "./tag.mjs";

const MOST = 60;

export function FindPage({ app }) {
  const { say } = app;
  const [typed, setTyped] = useState("");
  const found = typed.trim() === "" ? [] : app.search((d, p) => matches(d, p, typed, say(`kind.${d.kind}`)), MOST + 1);
  return html`<${Where} app=${app} title=${say("scan.title")} back="#/" />
    <main><div class="filter"><${TagTaker} app=${app} onTag=${(tag) => app.go(`#tag=${tag}`)} onPage=${(page) => app.go(page)} />
      <label class="find"><span class="unseen">${say("scan.place")}</span><input type="search" value=${typed} placeholder=${say("scan.place")} autocomplete="off" onInput=${(e) => setTyped(e.currentTarget.value)} /></label></div>
      ${typed.trim() !== "" && found.length === 0 && html`<p class="hint pad">${say("field.nothing_found")}</p>`}
      <ul class="rows">${found.slice(0, MOST).map(({ site, device, place }) => html`<${FoundRow} app=${app} key=${device.id} site=${site} device=${device} place=${place} href=${toDevice(device.id)} />`)}</ul>
      ${found.length > MOST && html`<p class="hint pad">${say("scan.more")}</p>`}
    </main><${Foot} app=${app} />`;
}

export function FoundRow({ app, site, device, place, href }) {
  return html`<li><a class="row" href=${href}><span class="name">${titleOf(app, device, place)}</span>
    ${device.tag ? html`<span class="tag">${showTag(device.tag)}</span>` : html`<span></span>`}
    <span class="quiet">${[site.snapshot.site.name, place?.room, app.say(`kind.${device.kind}`), circuitOf(device)].filter(Boolean).join(" · ")}</span></a></li>`;
}

/** A label no device on this phone has: bound here and now, or put on a new device, which can be tested at once. */
export function UnknownTagPage({ app, tag }) {
  const { say } = app;
  const good = parseTag(tag);
  const sites = app.sites().filter((s) => s.taken);
  if (!good) return html`<${Where} app=${app} title=${say("scan.not_a_tag")} back="#/find" /><main><p class="hint pad">${say("scan.check")}</p></main><${Foot} app=${app} />`;
  return html`<${Where} app=${app} title=${say("scan.unbound")} tag=${good} back="#/find" />
    <main><p class="hint pad">${say("scan.unbound_hint")}</p>
      ${sites.map((s) => html`<section class="room" key=${s.log}>${sites.length > 1 && html`<h2>${s.name}</h2>`}<div class="choose">
        <a class="big go" href=${`#/add/${encodeURIComponent(s.code)}/${good}`}><b>${say("scan.add")}</b><span>${say("scan.add_hint")}</span></a>
        <a class="big" href=${`#/bind/${encodeURIComponent(s.code)}/${good}`}><b>${say("scan.bind")}</b><span>${say("scan.bind_hint")}</span></a></div></section>`)}
      <${NotHere} app=${app} />
      ${sites.length === 0 && html`<p class="hint pad">${say("field.lost_hint")}</p>`}
    </main><${Foot} app=${app} />`;
}

/** The label may be of a site whose copy is not here: an item of its depot. What is added here instead can be made one with it later. */
function NotHere({ app }) {
  const away = app.sites().filter((s) => !s.taken);
  return html`<p class="hint pad">${app.say("item.unknown")}${away.length > 0 && html` ${app.say("item.not_along", { sites: away.map((s) => s.name).join(", ") })} <a href="#/along">${app.say("item.take_along")}</a>`}</p>`;
}
