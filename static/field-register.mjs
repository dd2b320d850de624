// Work on the register at the wall: a device found on site is added, a label bound, moved or swapped, a spot renamed, a
// device moved.

import { html, useState } from "./vendor/htm-preact.mjs";
import { circuitOf, contextOf, Foot, titleOf, Where } from "./field-parts.mjs";
import { ChoiceField, kindsOf, PlaceFields, TextField } from "./field-fields.mjs";
import { FoundRow } from "./field-find.mjs";
import { isPortable } from "./items.mjs";
import { TagTaker } from "./field-scan.mjs";
import { matches } from "./list.mjs";
import { circuitsOf } from "./own-facts.mjs";
import { addFacts, bindFacts, moveFacts, renameFacts, swapFacts } from "./register-work.mjs";
import { toDevice, toSite, toTest } from "./route.mjs";
import { showTag } from "./tag.mjs";

const place4 = (p) => ({ building: p?.building ?? "", floor: p?.floor ?? "", room: p?.room ?? "", name: p?.name ?? "" });

/** Walk and register: room, kind and circuit are the last one's, so that a device takes a scan, its spot and one tap. */
export function AddPage({ app, site, tag }) {
  const { say } = app;
  const key = `add|${site.log}`, last = app.state.me.last_added?.[site.log] ?? {};
  const start = { place: { ...place4(last.place), name: "" }, device: { kind: last.device?.kind ?? kindsOf(site)[0], circuit: last.device?.circuit ?? "", make: last.device?.make ?? "", model: last.device?.model ?? "" }, tag: tag ?? null };
  const typed = { ...(app.pageDraft(key) ?? start), ...(tag ? { tag } : {}) };
  const [missing, setMissing] = useState(false);
  const set = (change) => app.setPageDraft(key, site, { ...typed, ...change });
  const device = (f) => (value) => set({ device: { ...typed.device, [f]: value } });
  const portable = isPortable(typed.device.kind);
  const holder = typed.tag && app.deviceByTag(typed.tag);
  const ready = typed.device.kind && (portable ? true : typed.place.name.trim() !== "") && !holder;
  const keep = async (then) => {
    if (!ready) return setMissing(true);
    const made = addFacts({ typed: { ...typed, place: portable ? {} : typed.place }, places: site.places.values(), newId: app.newId });
    const title = portable ? say(`kind.${typed.device.kind}`) : typed.place.name.trim();
    if (!(await app.write(site, made.facts, { drafts: [key], said: title }))) return;
    app.remember("last_added", { ...app.state.me.last_added, [site.log]: { place: typed.place, device: typed.device } });
    setMissing(false);
    const form = then === "test" && app.formFor(site, typed.device.kind);
    app.go(form ? toTest(made.device, form.task) : `#/add/${encodeURIComponent(site.snapshot.site.code)}`, { keep: true });
  };
  const circuits = [...circuitsOf(site.devices)].map(([id, c]) => [id, circuitOf(c)]).sort((a, b) => a[1].localeCompare(b[1], undefined, { numeric: true }));
  return html`<${Where} app=${app} title=${say("register.add")} context=${site.snapshot.site.name} back=${toSite(site.snapshot.site.code)} />
    <main><section class="ask"><span class="q">${say("register.label")}</span>
        ${typed.tag ? html`<p class="beside"><span class="tag big-tag">${showTag(typed.tag)}</span><button type="button" class="link" onClick=${() => { set({ tag: null }); if (tag) app.go(`#/add/${encodeURIComponent(site.snapshot.site.code)}`); }}>${say("register.other_label")}</button></p>`
          : html`<${TagTaker} app=${app} onTag=${(t) => set({ tag: t })} /><p class="hint">${say("register.label_later")}</p>`}
        ${holder && html`<p class="bad" role="alert">${say("register.label_taken", { what: app.titleById(holder.id) })}</p>`}</section>
      <section class="ask">${!portable && html`<${PlaceFields} app=${app} site=${site} value=${typed.place} set=${(place) => set({ place })} only=${["name", "room", "floor", "building"]} />`}
        ${missing && !portable && typed.place.name.trim() === "" && html`<p class="bad" role="alert">${say("register.no_spot")}</p>`}
        <${ChoiceField} id="kind" label=${say("register.kind")} value=${typed.device.kind} set=${device("kind")} options=${kindsOf(site).map((k) => [k, say(`kind.${k}`)])} />
        ${portable ? html`<${TextField} id="serial" label=${say("register.serial")} value=${typed.device.serial} set=${device("serial")} />`
          : html`<${ChoiceField} id="circuit" label=${say("register.circuit")} value=${typed.device.circuit} set=${device("circuit")} empty=${say("register.circuit_unknown")} options=${circuits} />`}
        <${TextField} id="make" label=${say("register.make")} value=${typed.device.make} set=${device("make")} />
        <${TextField} id="model" label=${say("register.model")} value=${typed.device.model} set=${device("model")} /></section>
      <div class="choose"><button type="button" class="big" disabled=${app.state.saving} onClick=${() => keep("test")}>${say("register.add_test")}</button></div>
    </main><${Foot} app=${app}><button type="button" class="big go" aria-disabled=${String(!ready)} disabled=${app.state.saving} onClick=${() => keep("next")}>${say("register.add_next")}</button><//>`;
}

/** A label at hand, the device still to be named. */
export function BindPage({ app, site, tag }) {
  const { say } = app;
  const [typed, setTyped] = useState("");
  const list = site.devices.filter((d) => (typed.trim() === "" ? !d.tag : matches(d, site.places.get(d.place), typed, say(`kind.${d.kind}`)))).slice(0, 100);
  return html`<${Where} app=${app} title=${say("register.bind_which")} tag=${tag} context=${site.snapshot.site.name} back="#/find" />
    <main><div class="filter"><label class="find"><span class="unseen">${say("scan.place")}</span><input type="search" value=${typed} placeholder=${say("scan.place")} autocomplete="off" onInput=${(e) => setTyped(e.currentTarget.value)} /></label></div>
      <ul class="rows">${list.map((d) => html`<${FoundRow} app=${app} key=${d.id} site=${site} device=${d} place=${site.places.get(d.place)} href=${`#/label/${d.id}/${tag}`} />`)}</ul>
      ${list.length === 0 && html`<p class="hint pad">${say(typed ? "field.nothing_found" : "register.all_labelled")}</p>`}
    </main><${Foot} app=${app} />`;
}

/** The label of one device: bound, moved here from another, or changed with the other's in one step. */
export function LabelPage({ app, site, device, place, given }) {
  const { say } = app;
  const [tag, setTag] = useState(given ?? null);
  const found = tag && tag !== device.tag ? app.findByTag(tag) : null;
  const title = titleOf(app, device, place), back = toDevice(device.id);
  const done = async (facts) => {
    if (!(await app.write(site, facts, { said: say("register.label_kept", { what: title }) }))) return;
    app.go(back, { keep: true });
  };
  const bind = async () => {
    if (found && found.site.log !== site.log) { // two books, so two steps; freed there first, so that no label ever names two things
      const [free, ...rest] = bindFacts(device, tag, found.device);
      if (await app.write(found.site, [free], {})) await done(rest);
      return;
    }
    await done(bindFacts(device, tag, found?.device));
  };
  return html`<${Where} app=${app} title=${title} tag=${device.tag} context=${contextOf(app, device, place)} back=${back} />
    <main><h2 class="task">${say(device.tag ? "register.not_this" : "register.bind")}</h2>
      <section class="ask"><p class="hint">${say(device.tag ? "register.not_this_hint" : "register.bind_hint")}</p>
        <${TagTaker} app=${app} onTag=${setTag} label=${say("register.label_here")} />
        ${tag && html`<p><span class="tag big-tag">${showTag(tag)}</span></p>`}
        ${tag && tag === device.tag && html`<p class="hint">${say("register.same_label")}</p>`}
        ${found && html`<p class="caution">${say("register.names_other", { what: titleOf(app, found.device, found.place), context: contextOf(app, found.device, found.place) })}</p>`}</section>
      ${tag && tag !== device.tag && html`<div class="choose">
        ${found && device.tag && found.site.log === site.log && html`<button type="button" class="big go" disabled=${app.state.saving} onClick=${() => done(swapFacts(device, found.device))}><b>${say("register.swap")}</b><span>${say("register.swap_hint", { here: showTag(tag), there: showTag(device.tag) })}</span></button>`}
        <button type="button" class=${found && device.tag ? "big" : "big go"} disabled=${app.state.saving} onClick=${bind}><b>${say(found ? "register.take" : "register.bind")}</b>${found && html`<span>${say("register.take_hint", { what: titleOf(app, found.device, found.place) })}</span>`}</button></div>`}
      ${device.tag && html`<p class="pad"><button type="button" class="link" disabled=${app.state.saving} onClick=${() => done([{ kind: "tag.freed", subject: device.place ?? device.id, body: { tag: device.tag } }])}>${say("register.free")}</button></p>`}
    </main><${Foot} app=${app} />`;
}

/** The spot is called otherwise, or the device sits in another one. */
export function MovePage({ app, site, device, place }) {
  const { say } = app;
  const key = `move|${device.id}`, typed = app.pageDraft(key) ?? place4(place);
  const [same, setSame] = useState(false);
  const title = titleOf(app, device, place), back = toDevice(device.id);
  const keep = async (facts) => {
    if (!facts) return setSame(true);
    if (await app.write(site, facts, { drafts: [key], said: title })) app.go(back, { keep: true });
  };
  const moved = () => keep(typed.name.trim() === "" ? null : moveFacts({ device, typed, places: site.places.values(), newId: app.newId }));
  return html`<${Where} app=${app} title=${title} tag=${device.tag} context=${contextOf(app, device, place)} back=${back} />
    <main><h2 class="task">${say("register.move")}</h2>
      <section class="ask"><${PlaceFields} app=${app} site=${site} value=${typed} set=${(next) => { setSame(false); app.setPageDraft(key, site, next); }} />
        ${same && html`<p class="bad" role="alert">${say(typed.name.trim() === "" ? "register.no_spot" : "register.nothing_changed")}</p>`}</section>
      <div class="choose"><button type="button" class="big go" disabled=${app.state.saving} onClick=${moved}><b>${say("register.moved")}</b><span>${say("register.moved_hint")}</span></button>
        ${place && html`<button type="button" class="big" disabled=${app.state.saving} onClick=${() => keep(typed.name.trim() === "" ? null : renameFacts(place, typed))}><b>${say("register.renamed")}</b><span>${say("register.renamed_hint")}</span></button>`}</div>
    </main><${Foot} app=${app} />`;
}
