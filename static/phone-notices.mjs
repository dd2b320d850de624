// What every page says about the phone itself and the server's book: that the phone cannot keep the client, that a newer version
// waits, that the book was restored or does not go on from what this phone knew.

import { html } from "./vendor/htm-preact.mjs";
import { doubted } from "./heads.mjs";
import { isCalm } from "./version.mjs";

export function PhoneNotices({ app }) {
  const { say, state } = app;
  return html`
    ${state.insecure && html`<p class="notice bad" role="alert">${say("phone.insecure")} ${state.insecure.at ? html`<a href=${`${state.insecure.at}/field`}>${say("phone.insecure_to", { address: state.insecure.at })}</a>` : say("phone.insecure_ask")}</p>`}
    ${state.newer && html`<p class="notice" role="status">${say(isCalm(state) ? "phone.newer" : "phone.newer_later")} ${isCalm(state) && html`<button type="button" onClick=${app.takeNewer}>${say("phone.take_newer")}</button>`}</p>`}
    ${doubted(state.me).length > 0 && html`<p class="notice bad" role="alert">${say("phone.book_doubted")} <a href="#/tray">${say("phone.book_more")}</a></p>`}
    ${state.me.restored && html`<p class="notice" role="status">${say(state.me.restored.another ? "phone.book_another" : "phone.book_restored")} <button type="button" onClick=${app.understood}>${say("phone.book_understood")}</button></p>`}`;
}
