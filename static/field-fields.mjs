// Fields of the register pages: text with what is known to choose from, choices, and drafts of a page that outlive it.

import { html } from "./vendor/htm-preact.mjs";

/** props: label, value, set(text), known (texts to offer), id. */
export function TextField({ label, value, set, known = [], id, hint }) {
  return html`<div class="field-line"><label class="q" for=${id}>${label}</label>
    <input id=${id} value=${value ?? ""} autocomplete="off" list=${known.length > 0 ? `${id}-known` : undefined} aria-describedby=${hint ? `${id}-hint` : undefined} onInput=${(e) => set(e.currentTarget.value)} />
    ${hint && html`<p class="hint" id=${`${id}-hint`}>${hint}</p>`}
    ${known.length > 0 && html`<datalist id=${`${id}-known`}>${known.map((k) => html`<option key=${k} value=${k} />`)}</datalist>`}</div>`;
}

/** props: label, value, set(value), options [[value, words]], id, empty (words for none). */
export function ChoiceField({ label, value, set, options, id, empty }) {
  return html`<div class="field-line"><label class="q" for=${id}>${label}</label>
    <select id=${id} value=${value ?? ""} onChange=${(e) => set(e.currentTarget.value)}>
      ${empty !== undefined && html`<option value="">${empty}</option>`}
      ${options.map(([v, words]) => html`<option key=${v} value=${v}>${words}</option>`)}</select></div>`;
}

/** One thing to confirm by hand. */
export function Confirm({ done, set, children, id }) {
  return html`<button type="button" id=${id} class="big confirm" aria-pressed=${String(Boolean(done))} onClick=${() => set(!done)}><svg viewBox="0 0 12 12" aria-hidden="true"><path d=${done ? "M1 6l3.5 4L11 2" : "M1 1h10v10H1z"} /></svg><span>${children}</span></button>`;
}

/** Building, floor, room and spot, with what the site has to choose from. */
export function PlaceFields({ app, site, value, set, only = ["building", "floor", "room", "name"] }) {
  const known = (f) => [...new Set([...site.places.values()].map((p) => p[f]).filter(Boolean))].slice(0, 60);
  return only.map((f) => html`<${TextField} key=${f} id=${`place-${f}`} label=${app.say(`register.place.${f}`)} value=${value[f]} known=${f === "name" ? [] : known(f)} set=${(text) => set({ ...value, [f]: text })} />`);
}

/** Kinds a site's forms know, those it has most of first. */
export function kindsOf(site) {
  const count = new Map(site.snapshot.forms.flatMap((f) => f.kinds).map((k) => [k, 0]));
  for (const d of site.devices) count.set(d.kind, (count.get(d.kind) ?? 0) + 1);
  return [...count].sort((a, b) => b[1] - a[1]).map(([kind]) => kind);
}
