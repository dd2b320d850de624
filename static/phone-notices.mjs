// What every page says about the phone itself: that it cannot keep the client, that a newer version waits.

import { html } from "./vendor/htm-preact.mjs";
import { isCalm } from "./version.mjs";

export function PhoneNotices({ app }) {
  const { say, state } = app;
  return html`
    ${state.insecure && html`<p class="notice bad" role="alert">${say("phone.insecure")}</p>`}
    ${state.newer && html`<p class="notice" role="status">${say(isCalm(state) ? "phone.newer" : "phone.newer_later")} ${isCalm(state) && html`<button type="button" onClick=${app.takeNewer}>${say("phone.take_newer")}</button>`}</p>`}`;
}
