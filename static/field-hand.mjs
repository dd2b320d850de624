// Handing the rest of a round to a colleague: codes on this screen, which the other phone reads. Neither needs a line.

import { html, useEffect, useState } from "./vendor/htm-preact.mjs";
import { Foot, Where } from "./field-parts.mjs";
import { Camera } from "./field-scan.mjs";
import { codesOf, devicesOf, gather, isWhole, readCode, roundOf } from "./hand-over.mjs";
import { toRound } from "./route.mjs";
import { leftOf, stopsLeft } from "./walk-round.mjs";

const toDay = (site) => `#/round/${encodeURIComponent(site.snapshot.site.code)}`;

/** tag: the id of a round made in the office; without one the walk of the day is handed over. */
export function HandPage({ app, site, tag: id }) {
  const { say } = app;
  const made = id && app.roundsOf(site).find((r) => r.id === id);
  // What was left when the code was asked for.
  const [ids] = useState(() => (made ? [...new Set(stopsLeft(made.stops, app.walking(site)?.id === id ? app.passed(site) : []).map((s) => s.device))] : leftOf(site, app.skipped(site)).map((d) => d.id)));
  const [at, setAt] = useState(0);
  const texts = codesOf(site.snapshot.site.code, ids, made?.id), back = made ? toRound(site.snapshot.site.code, id) : toDay(site);
  const done = () => {
    if (made && app.walking(site)?.id !== id) app.startRound(site, id);
    app.giveAway(site, ids);
    app.go(back);
  };
  return html`<${Where} app=${app} title=${say("walk.hand_title", { n: ids.length })} context=${site.snapshot.site.name} back=${back} />
    <main>${ids.length > 0 && html`<${Code} app=${app} text=${texts[at]} label=${say("walk.hand_code", { n: at + 1, of: texts.length })} />`}
      ${texts.length > 1 && html`<p class="pad" role="status"><b>${say("walk.hand_code", { n: at + 1, of: texts.length })}</b></p><div class="pair pad">
        <button type="button" disabled=${at === 0} onClick=${() => setAt(at - 1)}>${say("walk.code_before")}</button>
        <button type="button" disabled=${at === texts.length - 1} onClick=${() => setAt(at + 1)}>${say("walk.code_after")}</button></div>`}
      <p class="hint pad">${say("walk.hand_hint")}</p>
    </main><${Foot} app=${app}>${ids.length > 0 && html`<button type="button" class="big go" onClick=${done}>${say("walk.hand_done")}</button>`}<//>`;
}

/** A code, black on white whatever the page's colours: readers want it so. */
function Code({ app, text, label }) {
  const [rows, setRows] = useState(null), [trouble, setTrouble] = useState(false);
  useEffect(() => {
    import("./vendor/qr-index.mjs").then(({ encodeQR }) => setRows(encodeQR(text, "raw", { ecc: "low", border: 4 })), () => setTrouble(true));
  }, [text]);
  if (trouble) return html`<p class="bad pad" role="alert">${app.say("walk.hand_no_code")}</p>`;
  if (!rows) return null;
  const path = rows.map((row, y) => row.map((on, x) => (on ? `M${x} ${y}h1v1h-1z` : "")).join("")).join("");
  return html`<svg class="qr" role="img" aria-label=${label} viewBox=${`0 0 ${rows.length} ${rows.length}`} shape-rendering="crispEdges"><rect width="100%" height="100%" fill="#fff" /><path d=${path} fill="#000" /></svg>`;
}

export function TakePage({ app, site }) {
  const { say } = app;
  const [read, setRead] = useState(null);
  const code = site.snapshot.site.code.toUpperCase();
  const take = (text) => {
    const one = readCode(text);
    if (!one) return { error: "walk.take_not" };
    if (one.site !== code) return { error: "walk.take_other" };
    return { value: one };
  };
  const add = (one) => {
    const now = gather(read, one);
    setRead(now);
    if (!isWhole(now)) return;
    app.takeOn(site, devicesOf(site.devices, now).ids, roundOf(site.snapshot.rounds, now)?.id);
  };
  const whole = isWhole(read), found = whole && devicesOf(site.devices, read), made = whole && roundOf(site.snapshot.rounds, read);
  return html`<${Where} app=${app} title=${say("walk.take_title")} context=${site.snapshot.site.name} back=${toDay(site)} />
    <main>${whole
      ? html`<p class="pad" role="status"><b>${say("walk.took", { n: found.ids.length })}</b></p>${found.unknown > 0 && html`<p class="bad pad">${say("walk.took_unknown", { n: found.unknown })}</p>`}`
      : html`${read && html`<p class="pad" role="status"><b>${say("walk.take_more", { n: Object.keys(read.parts).length, of: read.of })}</b></p>`}
        <div class="pad"><${Camera} app=${app} key=${Object.keys(read?.parts ?? {}).join()} read=${take} hold="walk.take_hint" onTag=${add} onClose=${() => app.go(toDay(site))} /></div>`}
    </main><${Foot} app=${app}>${whole && html`<a class="big go" href=${toRound(site.snapshot.site.code, made?.id)}>${say("walk.take_go")}</a>`}<//>`;
}
