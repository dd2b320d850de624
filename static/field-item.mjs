// An item that travels, on the phone: where it is now, brought here with one tap, and what is here from elsewhere.

import { html } from "./vendor/htm-preact.mjs";
import { contextOf, Foot, LostPage, titleOf, Where } from "./field-parts.mjs";
import { ChoiceField, TextField } from "./field-fields.mjs";
import { FoundRow } from "./field-find.mjs";
import { itemsHere, siteOf, travels, whereFacts } from "./items.mjs";
import { toDevice } from "./route.mjs";

const nameOf = (app, log) => app.sites().find((s) => s.log === log)?.name ?? app.say("item.unseen_site");

/** Where an item is, and one tap that brings it to the site this phone works at. */
export function WhereItIs({ app, site, device }) {
  const { say, state } = app;
  if (!travels(device)) return null;
  const at = siteOf(site.log, device), here = state.me.here;
  const bring = async () => {
    const facts = whereFacts({ depot: site.log, device, at: here, where: "" });
    if (facts && await app.write(site, facts, { said: say("item.kept", { what: titleOf(app, device), site: nameOf(app, here) }) })) app.go(toDevice(device.id), { keep: true });
  };
  return html`<p class="facts">${say(at === site.log ? "item.at_depot" : "item.at", { site: nameOf(app, at) })}${device.fields?.where ? `: ${device.fields.where}` : ""}</p>
    ${here && here !== at && app.sites().some((s) => s.log === here) && html`<div class="choose"><button type="button" class="big" id="bring" disabled=${state.saving} onClick=${bring}><b>${say("item.bring")}</b><span>${say("item.bring_hint", { site: nameOf(app, here) })}</span></button></div>`}`;
}

/** Another site, or the spot there in words. */
export function BringPage({ app, site, device, place }) {
  const { say } = app;
  if (!travels(device)) return html`<${LostPage} app=${app} text=${say("field.device_not_here")} />`;
  const key = `bring|${device.id}`, typed = app.pageDraft(key) ?? { at: siteOf(site.log, device), where: device.fields?.where ?? "" };
  const title = titleOf(app, device, place), facts = whereFacts({ depot: site.log, device, ...typed });
  const set = (change) => app.setPageDraft(key, site, { ...typed, ...change });
  const keep = async () => {
    if (facts && await app.write(site, facts, { drafts: [key], said: say("item.kept", { what: title, site: nameOf(app, typed.at) }) })) app.go(toDevice(device.id), { keep: true });
  };
  return html`<${Where} app=${app} title=${title} tag=${device.tag} context=${contextOf(app, device, place)} back=${toDevice(device.id)} />
    <main><h2 class="task">${say("item.title")}</h2><p class="hint pad">${say("item.hint", { depot: site.snapshot.site.name })}</p>
      <section class="ask"><${ChoiceField} id="at" label=${say("item.site")} value=${typed.at} set=${(at) => set({ at })} options=${app.sites().map((s) => [s.log, s.log === site.log ? say("item.depot_option", { site: s.name }) : s.name])} />
        <${TextField} id="where" label=${say("item.where")} value=${typed.where} set=${(where) => set({ where })} /></section>
    </main><${Foot} app=${app}><button type="button" class="big go" aria-disabled=${String(!facts)} disabled=${app.state.saving} onClick=${keep}>${say("item.save")}</button><//>`;
}

/** Items of other depots that are at a site. */
export function ItemsHere({ app, site }) {
  const list = itemsHere(app.openSites(), site.log);
  if (list.length === 0) return null;
  return html`<section class="room"><h2>${app.say("item.here", { n: list.length })}</h2>
    <ul class="rows">${list.map((f) => html`<${FoundRow} app=${app} key=${f.device.id} site=${f.site} device=${f.device} href=${toDevice(f.device.id)} />`)}</ul></section>`;
}
