// Photos of a test: taken or chosen, looked at, taken out again; they are sent after the entry that names them.

import { html, useEffect, useState } from "./vendor/htm-preact.mjs";
import { MOST_PHOTOS, photoOf } from "./photo.mjs";

export function Photos({ app, draft }) {
  const { say } = app, list = draft.photos ?? [];
  const [trouble, setTrouble] = useState(null), [busy, setBusy] = useState(false);
  const take = async (e) => {
    const files = [...e.currentTarget.files].slice(0, MOST_PHOTOS - list.length);
    e.currentTarget.value = "";
    setBusy(true);
    setTrouble(null);
    for (const file of files) await photoOf(file).then((p) => app.addPhoto(draft.key, p, draft.begin)).catch((err) => setTrouble(err?.name === "QuotaExceededError" ? "photo.full" : "photo.not_read"));
    setBusy(false);
  };
  return html`<section class="ask photos"><span class="q">${say("photo.title", { n: list.length, most: MOST_PHOTOS })}</span>
    ${list.length > 0 && html`<div class="shots">${list.map((sha) => html`<${Shot} key=${sha} app=${app} sha=${sha} remove=${() => app.removePhoto(draft.key, sha)} />`)}</div>`}
    ${list.length < MOST_PHOTOS && html`<label class="big shoot">${say(busy ? "photo.busy" : "photo.take")}<input class="unseen" type="file" accept="image/*" capture="environment" disabled=${busy} onChange=${take} /></label>`}
    ${trouble && html`<p class="bad" role="alert">${say(trouble)}</p>`}
    ${list.length > 0 && html`<p class="hint">${say("photo.people")}</p>`}</section>`;
}

function Shot({ app, sha, remove }) {
  const [src, setSrc] = useState(null);
  useEffect(() => {
    let url = null, over = false;
    app.photo(sha).then((row) => { if (row && !over) setSrc(url = URL.createObjectURL(row.blob)); });
    return () => { over = true; if (url) URL.revokeObjectURL(url); };
  }, [sha]);
  return html`<figure>${src && html`<img src=${src} alt=${app.say("photo.alt")} />`}<button type="button" class="link" onClick=${remove}>${app.say("photo.remove")}</button></figure>`;
}
