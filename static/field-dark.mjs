// Trip once, scan what went dark: builds the map of what a protector feeds, by ordinary work.

import { html, useState } from "./vendor/htm-preact.mjs";
import { circuitOf, contextOf, Foot, Mark, titleOf, Where } from "./field-parts.mjs";
import { Confirm } from "./field-fields.mjs";
import { TagTaker } from "./field-scan.mjs";
import { ahead, protects } from "./protection-map.mjs";
import { criticalLoads, lost, sweepRows } from "./dark-sweep.mjs";
import { roomMates } from "./walk-round.mjs";
import { toDevice } from "./route.mjs";
import { showTag } from "./tag.mjs";

/** "Resets at: Pantry, by the sink, LP-2 / 14", from the map on this phone: every protector ahead, nearest first, and last the
 *  circuit's own breaker. dead: the outlet was found without power, so that its breaker is told even where nothing is mapped. */
export function ResetsAt({ app, device, dead = false }) {
  const found = app.findDevice(device.id), devices = found?.site.devices ?? [];
  const from = ahead(devices, device).filter((d) => protects(d));
  const breaker = circuitOf(device);
  if (from.length === 0 && !(dead && breaker)) return null;
  const where = (d) => [titleOf(app, d, found.site.places.get(d.place)), found.site.places.get(d.place)?.room, circuitOf(d)].filter(Boolean).join(", ");
  return html`<div class="resets">${from.map((d, i) => html`<p key=${d.id}><a href=${toDevice(d.id)}>${app.say(i === 0 ? "dark.resets_at" : "dark.then_at", { where: where(d) })}</a></p>`)}
    ${breaker && html`<p class="quiet">${app.say("dark.breaker_at", { where: breaker })}</p>`}</div>`;
}

/** What TEST takes the power from, named. */
export function CriticalLoads({ app, site, device }) {
  const loads = criticalLoads(site.devices, site.places, device);
  return loads.length === 0 ? null : html`<p class="caution"><b>${app.say("field.critical_load", { load: loads.join("; ") })}</b> ${app.say("field.critical_load_do")}</p>`;
}

export function DarkPage({ app, site, device, place }) {
  const { say } = app;
  const key = `dark|${device.id}`, kept = app.pageDraft(key) ?? { said: [], off: null, restored: false };
  const said = new Map(kept.said), [unknown, setUnknown] = useState(null), [more, setMore] = useState(false);
  const put = (id, word) => app.setPageDraft(key, site, { ...kept, said: [...kept.said.filter(([d]) => d !== id), ...(word ? [[id, word]] : [])], off: kept.off ?? app.now() });
  const rows = sweepRows(site.devices, device, said);
  const taken = (tag) => {
    const found = app.findByTag(tag);
    setUnknown(found && found.site.log === site.log ? null : tag);
    if (found && found.site.log === site.log && found.device.id !== device.id) put(found.device.id, "dark");
  };
  const back = toDevice(device.id), gone = lost(rows), open = rows.filter((r) => !r.said).length;
  const near = more ? roomMates(site, device).filter((d) => d.id !== device.id && !rows.some((r) => r.device.id === d.id)) : [];
  const ready = said.size > 0 && kept.restored;
  const keep = async () => {
    if (!ready) return;
    if (await app.keepDark(site, device, rows, key)) app.go(back, { keep: true });
  };
  return html`<${Where} app=${app} title=${titleOf(app, device, place)} tag=${device.tag} context=${contextOf(app, device, place)} back=${back} />
    <main><h2 class="task">${say("dark.title")}</h2>
      <${CriticalLoads} app=${app} site=${site} device=${device} />
      <p class="hint pad">${say("dark.hint")}</p>
      <div class="filter"><${TagTaker} app=${app} onTag=${taken} label=${say("dark.scan")} />
        ${unknown && html`<p class="caution">${say("dark.unknown", { tag: showTag(unknown) })} <a href=${`#/add/${encodeURIComponent(site.snapshot.site.code)}/${unknown}`}>${say("scan.add")}</a></p>`}</div>
      <ul class="rows">${rows.map((r) => html`<${SweepRow} app=${app} key=${r.device.id} row=${r} place=${site.places.get(r.device.place)} put=${put} />`)}
        ${near.map((d) => html`<${SweepRow} app=${app} key=${d.id} row=${{ device: d }} place=${site.places.get(d.place)} put=${put} />`)}</ul>
      ${rows.length === 0 && html`<p class="hint pad">${say("dark.no_map")}</p>`}
      ${!more && html`<button type="button" class="big more" onClick=${() => setMore(true)}>${say("dark.by_hand")}</button>`}
      ${gone.length > 0 && html`<p class="caution" role="alert"><b>${say("dark.lost", { n: gone.length })}</b> ${say("dark.lost_do")}</p>`}
      ${open > 0 && said.size > 0 && html`<p class="hint pad">${say("dark.open", { n: open })}</p>`}
      ${said.size > 0 && html`<div class="choose"><${Confirm} done=${kept.restored} set=${(on) => app.setPageDraft(key, site, { ...kept, restored: on })}>${say("dark.restored")}<//></div>`}
    </main><${Foot} app=${app}><button type="button" class="big go" aria-disabled=${String(!ready)} disabled=${app.state.saving} onClick=${keep}>${say("dark.keep")}</button><//>`;
}

function SweepRow({ app, row, place, put }) {
  const { say } = app, { device } = row;
  const button = (word) => html`<button type="button" aria-pressed=${String(row.said === word)} onClick=${() => put(device.id, row.said === word ? null : word)}>${say(`dark.${word}`)}</button>`;
  return html`<li class="row still"><span class="name">${titleOf(app, device, place)}</span>${device.tag ? html`<span class="tag">${showTag(device.tag)}</span>` : html`<span></span>`}
    <span class="quiet">${[place?.room, circuitOf(device), row.mapped ? say("dark.mapped") : ""].filter(Boolean).join(" · ")}</span>
    ${row.mapped && row.said === "live" && html`<${Mark} verdict="fail">${say("dark.lost_here")}<//>`}
    <span class="pair">${button("dark")}${button("live")}</span></li>`;
}
