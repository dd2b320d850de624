// Who makes the entries on a phone several people share.

import { html, useState } from "./vendor/htm-preact.mjs";
import { Foot, Where } from "./field-parts.mjs";
import { isPin } from "./pin.mjs";

export function PeoplePage({ app }) {
  const { say, state } = app, people = app.people(), own = people.find((p) => p.here);
  const [chosen, setChosen] = useState(null);
  return html`<${Where} app=${app} title=${state.me.name ? say("field.signed_as", { name: state.me.name }) : say("phone.people")} context=${say("phone.people")} back="#/" />
    <main>
      <ul class="rows">${people.filter((p) => !p.here).map((p) => html`<li key=${p.id} class="row still"><span class="name">${p.name}</span>
        ${p.hasPin ? html`<button type="button" class="small" aria-expanded=${String(chosen === p.id)} onClick=${() => setChosen(chosen === p.id ? null : p.id)}>${say("phone.switch")}</button>` : html`<span class="quiet">${say("phone.pin_none")}</span>`}
        ${chosen === p.id && html`<${PinForm} app=${app} label=${say("phone.pin_of", { name: p.name })} button=${say("phone.switch_go", { name: p.name })} send=${(pin) => app.switchTo(p.id, pin)} done=${() => app.go("#/")} />`}</li>`)}</ul>
      ${own && html`<section class="room"><h2>${say(own.hasPin ? "phone.pin_change" : "phone.pin_set")}</h2><p class="hint pad">${say("phone.pin_hint")}</p>
        <${NewPin} app=${app} had=${own.hasPin} /></section>`}
      <section class="room"><h2>${say("phone.new_person")}</h2><p class="hint pad">${say("phone.new_person_hint")}</p><button type="button" class="big more" onClick=${app.somebodyElse}>${say("field.sign_in")}</button></section>
    </main><${Foot} app=${app} />`;
}

function PinForm({ app, label, button, send, done }) {
  const { say } = app;
  const [pin, setPin] = useState(""), [trouble, setTrouble] = useState(null), [busy, setBusy] = useState(false);
  const go = async (e) => {
    e.preventDefault();
    if (busy) return;
    setBusy(true);
    const wrong = await send(pin).catch(() => "field.not_kept");
    setBusy(false);
    setTrouble(wrong);
    setPin("");
    if (!wrong) done();
  };
  return html`<form class="pin" onSubmit=${go}><${PinField} label=${label} value=${pin} set=${setPin} trouble=${trouble && say(trouble)} /><button class="big go" aria-disabled=${String(!isPin(pin) || busy)}>${button}</button></form>`;
}

function NewPin({ app, had }) {
  const { say } = app;
  const [before, setBefore] = useState(""), [pin, setPin] = useState(""), [said, setSaid] = useState(null), [busy, setBusy] = useState(false);
  const go = async (e) => {
    e.preventDefault();
    if (busy) return;
    if (!isPin(pin)) return setSaid("phone.pin_shape");
    setBusy(true);
    const wrong = await app.setPin(pin, before).catch(() => "field.not_kept");
    setBusy(false);
    setSaid(wrong ?? "phone.pin_kept");
    setPin("");
    setBefore("");
  };
  return html`<form class="pin pad" onSubmit=${go}>
    ${had && html`<${PinField} id="pin-before" label=${say("phone.pin_before")} value=${before} set=${setBefore} />`}
    <${PinField} id="pin-new" label=${say("phone.pin_new")} value=${pin} set=${setPin} trouble=${said && said !== "phone.pin_kept" && say(said)} />
    ${said === "phone.pin_kept" && html`<p role="status">${say(said)}</p>`}
    <button class="big" disabled=${busy}>${say("phone.pin_keep")}</button></form>`;
}

function PinField({ id = "pin", label, value, set, trouble }) {
  return html`<label class="q" for=${id}>${label}</label><input id=${id} type="password" inputmode="numeric" autocomplete="off" maxlength="12" value=${value} aria-invalid=${trouble ? "true" : null} aria-describedby=${trouble ? `${id}-e` : null} onInput=${(e) => set(e.currentTarget.value.replace(/\D/g, ""))} />
    ${trouble && html`<p class="bad" role="alert" id=${`${id}-e`}>${trouble}</p>`}`;
}
