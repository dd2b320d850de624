// After a fail, one flow: lock off and prove dead, then made safe, replaced, or put right and tested again. TEST is no
// lockout. What is open at the device is shown with what was done about it.

import { html } from "./vendor/htm-preact.mjs";
import { circuitOf, contextOf, Foot, Mark, titleOf, Where } from "./field-parts.mjs";
import { Confirm, TextField } from "./field-fields.mjs";
import { onSameCircuit, openDefects, saidFact } from "./defect-work.mjs";
import { showDay } from "./days.mjs";
import { toDevice, toTest } from "./route.mjs";

export function FailedPage({ app, site, device, place }) {
  const { say } = app;
  const key = `failed|${device.id}`, circuit = circuitOf(device);
  const typed = app.pageDraft(key) ?? { locked: false, dead: false, how: circuit ? say("failed.how_breaker", { circuit }) : "", repair: "" };
  const set = (change) => app.setPageDraft(key, site, { ...typed, ...change });
  const dead = typed.locked && typed.dead, title = titleOf(app, device, place), open = openDefects(device);
  const others = onSameCircuit(site.devices, device, site.places).map((d) => [titleOf(app, d, site.places.get(d.place)), site.places.get(d.place)?.critical_load].filter(Boolean).join(": "));
  const form = app.formFor(site, device.kind, failedTask(device) ?? "instrument");
  const keep = async (kind, how, then) => {
    if (how.trim() === "") return;
    const said = say(kind === "defect.made_safe" ? "failed.safe_kept" : "failed.repair_kept", { what: title });
    if (await app.write(site, [saidFact(kind, device, how.trim(), app.newId)], { drafts: [key], said })) app.go(then, { keep: true });
  };
  return html`<${Where} app=${app} title=${title} tag=${device.tag} context=${contextOf(app, device, place)} back=${toDevice(device.id)} />
    <main><h2 class="task">${say(failedTask(device) ? "failed.title" : "failed.title_seen")}</h2>
      <${Defects} app=${app} device=${device} />
      <p class="caution">${say("caution.not_lockout")} ${say("caution.licensed")}</p>
      ${others.length > 0 && html`<p class="caution"><b>${say("failed.also_feeds", { circuit })}</b> ${others.join("; ")}</p>`}
      <div class="choose">${["locked", "dead"].map((s) => html`<${Confirm} key=${s} id=${`step-${s}`} done=${typed[s]} set=${(on) => set({ [s]: on })}>${say(`replace.${s}`)}<//>`)}</div>
      <section class="ask"><${TextField} id="how" label=${say("failed.how")} value=${typed.how} set=${(how) => set({ how })} hint=${say("failed.how_hint")} /></section>
      <div class="choose">
        <button type="button" class="big go" disabled=${app.state.saving} aria-disabled=${String(typed.how.trim() === "")} onClick=${() => keep("defect.made_safe", typed.how, app.state.after ?? toDevice(device.id))}><b>${say("failed.safe")}</b><span>${say("failed.safe_hint")}</span></button>
        <a class="big" href=${`#/replace/${device.id}`}><b>${say("replace.title")}</b><span>${say("failed.replace_hint")}</span></a></div>
      ${!dead && html`<p class="closed">${say("failed.closed")}</p>`}
      ${dead && form && html`<section class="ask"><${TextField} id="repair" label=${say("failed.repair")} value=${typed.repair} set=${(repair) => set({ repair })} hint=${say("failed.repair_hint")} /></section>
        <div class="choose"><button type="button" class="big" disabled=${app.state.saving} aria-disabled=${String(typed.repair.trim() === "")} onClick=${() => keep("defect.repaired", typed.repair, toTest(device.id, form.task))}><b>${say("failed.repaired")}</b><span>${say("failed.repaired_hint")}</span></button></div>`}
      <p class="pad"><a href=${app.state.after ?? toDevice(device.id)}>${say(open.some((d) => d.severity === "unsafe" && !d.safe) || open.length === 0 ? "failed.leave_unsafe" : "failed.leave")}</a></p>
    </main><${Foot} app=${app} />`;
}

const failedTask = (device) => Object.keys(device.last ?? {}).find((t) => device.last[t].result === "fail");

/** What is open at a device, as the copy and this phone know it. */
export function Defects({ app, device }) {
  const { say } = app, list = openDefects(device);
  if (list.length === 0) return null;
  return html`<ul class="rows defects">${list.map((d) => html`<li class="row still" key=${d.id}>
    <${DefectMark} app=${app} defect=${d} />
    <span class="quiet">${[d.repaired ? say("failed.waits_test") : d.safe ? say("failed.is_safe", { how: d.safe }) : say("failed.in_use"), d.due ? say("failed.due", { day: showDay(app, d.due) }) : "", d.parts?.length ? say("failed.parts", { parts: d.parts.join(", ") }) : ""].filter(Boolean).join(" · ")}</span></li>`)}</ul>`;
}

/** A defect in one mark: what is wrong, red while somebody may still be hurt. */
export function DefectMark({ app, defect }) {
  const { say } = app, cause = `reading.${defect.cause}.name`;
  return html`<${Mark} verdict=${defect.severity === "unsafe" && !defect.safe ? "fail" : "watch"}>${defect.text || say(say.has(cause) ? cause : "failed.a_test")}<//>`;
}
