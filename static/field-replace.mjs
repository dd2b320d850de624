// Replacing a device, in one flow: lock off and prove dead, replace, LINE and LOAD, then the full test of the new one and
// what hangs behind it.

import { html } from "./vendor/htm-preact.mjs";
import { contextOf, Foot, titleOf, Where } from "./field-parts.mjs";
import { Confirm, TextField } from "./field-fields.mjs";
import { replaceFacts } from "./register-work.mjs";
import { toDevice, toTest } from "./route.mjs";

const STEPS = ["locked", "dead", "load"]; // in the order they are done; the device's own data stands before the last
const WHY = ["failed", "damaged", "age", "other"];

export function ReplacePage({ app, site, device, place }) {
  const { say } = app;
  const key = `replace|${device.id}`, typed = app.pageDraft(key) ?? { steps: {}, why: failed(device) ? "failed" : null, device: { make: device.fields?.make ?? "", model: device.fields?.model ?? "", serial: "" } };
  const set = (change) => app.setPageDraft(key, site, { ...typed, ...change });
  const step = (name) => (on) => set({ steps: { ...typed.steps, [name]: on } });
  const dead = typed.steps.locked && typed.steps.dead, ready = Boolean(dead && typed.why && typed.steps.load);
  const behind = app.feeds(site, device), title = titleOf(app, device, place);
  const keep = async () => {
    if (!ready) return;
    const reason = [say(`replace.why.${typed.why}`), say("replace.done_safely")].join("; ");
    const made = replaceFacts({ device, typed: typed.device, reason, on: site.today, newId: app.newId });
    const feeds = behind.map(({ device: d }) => ({ kind: "device.set", subject: d.id, body: { set: { fed_by: made.device }, ...(d.seen ? { seen: d.seen } : {}) } }));
    if (!(await app.write(site, [...made.facts, ...feeds], { drafts: [key], said: say("replace.kept", { what: title }) }))) return;
    const form = app.formFor(site, device.kind, "instrument");
    app.go(form ? toTest(made.device, form.task) : toDevice(made.device), { keep: true });
  };
  return html`<${Where} app=${app} title=${title} tag=${device.tag} context=${contextOf(app, device, place)} back=${toDevice(device.id)} />
    <main><h2 class="task">${say("replace.title")}</h2>
      <p class="caution">${say("caution.not_lockout")} ${say("caution.licensed")}</p>
      ${place?.critical_load && html`<p class="caution"><b>${say("field.critical_load", { load: place.critical_load })}</b> ${say("field.critical_load_do")}</p>`}
      ${behind.length > 0 && html`<p class="caution">${say("replace.feeds", { n: behind.length })} ${behind.map((b) => [titleOf(app, b.device, b.place), b.place?.critical_load].filter(Boolean).join(": ")).join("; ")}</p>`}
      <div class="choose">${STEPS.slice(0, 2).map((s) => html`<${Confirm} key=${s} id=${`step-${s}`} done=${typed.steps[s]} set=${step(s)}>${say(`replace.${s}`)}<//>`)}</div>
      ${!dead && html`<p class="closed">${say("replace.closed")}</p>`}
      ${dead && html`<section class="ask"><span class="q" id="q-why">${say("replace.reason")}</span><div class="pick" role="group" aria-labelledby="q-why">${WHY.map((w) => html`<button type="button" key=${w} aria-pressed=${String(typed.why === w)} onClick=${() => set({ why: w })}>${say(`replace.why.${w}`)}</button>`)}</div></section>
        <section class="ask">${["make", "model", "serial"].map((f) => html`<${TextField} key=${f} id=${f} label=${say(`register.${f}`)} value=${typed.device[f]} set=${(v) => set({ device: { ...typed.device, [f]: v } })} />`)}</section>
        <div class="choose"><${Confirm} id="step-load" done=${typed.steps.load} set=${step("load")}>${say("replace.load")}<//></div>
        <p class="hint pad">${say("replace.next")}</p>`}
    </main><${Foot} app=${app}><button type="button" class="big go" aria-disabled=${String(!ready)} disabled=${app.state.saving} onClick=${keep}>${say("replace.keep")}</button><//>`;
}

const failed = (device) => Object.values(device.last ?? {}).some((l) => l.result === "fail");
