// A defect somebody sees, without a test: in words, with photos, kept on the phone like everything else.

import { html, useState } from "./vendor/htm-preact.mjs";
import { contextOf, Foot, titleOf, Where } from "./field-parts.mjs";
import { ChoiceField, TextField } from "./field-fields.mjs";
import { Photos } from "./field-photo.mjs";
import { openedFact, SEVERITIES } from "./defect-work.mjs";
import { toDevice } from "./route.mjs";

export function FlawPage({ app, site, device, place }) {
  const { say } = app, [missing, setMissing] = useState(false);
  const key = `flaw|${device.id}`, typed = app.pageDraft(key) ?? { text: "", severity: SEVERITIES[0], parts: "" };
  const set = (change) => app.setPageDraft(key, site, { ...typed, ...change });
  const photos = app.state.drafts.get(key)?.photos ?? [], title = titleOf(app, device, place), said = typed.text.trim() !== "";
  const keep = async () => {
    if (!said) return setMissing(true);
    const fact = openedFact({ device, typed, photos, newId: app.newId });
    if (!(await app.write(site, [fact], { drafts: [key], photos, said: say("flaw.kept", { what: title }) }))) return;
    app.go(typed.severity === "unsafe" ? `#/failed/${device.id}` : toDevice(device.id), { keep: true });
  };
  return html`<${Where} app=${app} title=${title} tag=${device.tag} context=${contextOf(app, device, place)} back=${toDevice(device.id)} />
    <main><h2 class="task">${say("flaw.title")}</h2>
      <section class="ask"><${TextField} id="text" label=${say("flaw.what")} value=${typed.text} set=${(text) => set({ text })} hint=${say("flaw.what_hint")} />
        ${missing && !said && html`<p class="bad" role="alert">${say("flaw.no_text")}</p>`}
        <${ChoiceField} id="severity" label=${say("flaw.severity")} value=${typed.severity} set=${(severity) => set({ severity })} options=${SEVERITIES.map((s) => [s, say(`flaw.severities.${s}`)])} />
        <${TextField} id="parts" label=${say("flaw.parts")} value=${typed.parts} set=${(parts) => set({ parts })} hint=${say("flaw.parts_hint")} /></section>
      <${Photos} app=${app} draft=${{ key, photos, begin: () => set({}) }} />
    </main><${Foot} app=${app}><button type="button" class="big go" aria-disabled=${String(!said)} disabled=${app.state.saving} onClick=${keep}>${say("flaw.keep")}</button><//>`;
}
