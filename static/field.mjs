// Starts the field client: opens the databases, reads the words, wires state, exchange and pages together. The only
// module that touches the page's globals beside db.mjs and the views.

import { html, render } from "./vendor/htm-preact.mjs";
import { alongDB, trayDB } from "./db.mjs";
import { exchange } from "./exchange.mjs";
import { fieldApp } from "./field-app.mjs";
import { HomeScreenPage } from "./field-tray.mjs";
import { caring } from "./caring.mjs";
import { JudgeVersion } from "./judge.mjs";
import { makeRecord } from "./making.mjs";
import { newId } from "./record-line.mjs";
import { peopleHere } from "./people.mjs";
import { Page } from "./pages.mjs";
import { parseRoute, toDevice } from "./route.mjs";
import { sending } from "./sending.mjs";
import { syncing } from "./syncing.mjs";
import { isCalm, versions } from "./version.mjs";
import { LANGUAGES, languageOf, speaker } from "./words.mjs";

const root = document.getElementById("field");
const now = () => Date.now();
const AFTER_SAVE = 400; // ms: the page says "saved" first, and a tap in the same breath is not held up by sending
const LONGEST_HELD = 5_000; // ms: however fast somebody taps, sending begins by then

/** The phone's words in a language; one that is not laid in and cannot be fetched gives way to another that is here. */
async function wordsOf(wish) {
  for (const lang of [wish, ...LANGUAGES.filter((l) => l !== wish)]) {
    const answer = await fetch(new URL(`./words/phone-${lang}.json`, import.meta.url)).catch(() => null);
    if (!answer?.ok) continue;
    document.documentElement.lang = lang;
    return speaker(await answer.json(), { lang });
  }
  throw new Error("no words could be read");
}

async function start() {
  const say = await wordsOf(languageOf(navigator.languages));
  if (onlyATab(navigator)) {
    root.replaceChildren();
    render(html`<${HomeScreenPage} say=${say} />`, root);
    return;
  }
  const tray = trayDB(), along = alongDB();
  let keepSaved = false, drawing = false, drawn = false;
  const draw = (app) => {
    if (drawing) return;
    drawing = true; // many changes in one turn are drawn once
    queueMicrotask(() => {
      drawing = false;
      followTag(app);
      if (!drawn) root.replaceChildren();
      drawn = true;
      render(html`<${Page} app=${app} />`, root);
    });
  };
  const go = (hash, { keep = false } = {}) => {
    keepSaved = keep;
    if (location.hash !== hash) history.pushState(null, "", hash); // setting the hash would look for an anchor and tell of it later
    onRoute();
  };
  let sendTimer, held = 0;
  const sendSoon = () => {
    clearTimeout(sendTimer);
    held ||= now();
    sendTimer = setTimeout(() => { held = 0; others.tell(); sender.kick(); }, Math.max(0, Math.min(AFTER_SAVE, held + LONGEST_HELD - now())));
  };
  const app = fieldApp({ tray, say, draw, go, now, make: makeRecord, newId: () => newId(now()), judgeVersion: JudgeVersion, soon: (fn, ms) => setTimeout(fn, ms), sendNow: () => sender.kick(), keepSending: sendSoon, takeOver: () => sync.takeOver(), entryOf: (id) => sync.entry(id), leave: (path) => location.assign(path) });
  const sync = syncing({ state: app.state, tray, along, net: exchange({ fetch: (...a) => fetch(...a), now }), now, newId: () => newId(now()), changed: app.changed });
  const sender = sending({ run: () => alone(async () => { const done = await sync.run(); others.tell(); return done; }), later: (fn, ms) => setTimeout(fn, ms), cancel: clearTimeout, random: Math.random });
  const version = versions({ container: navigator.serviceWorker, calm: () => isCalm(app.state), session: sessionStorage, now,
    offered: (yes) => { app.state.newer = yes; app.changed(); }, load: () => location.reload(), later: (fn, ms) => setTimeout(fn, ms) });
  const others = otherPages(async () => { await readKept(app.state, tray, along); app.changed(); });
  Object.assign(app, { takeNewer: version.take, goOn: sync.goOn, understood: () => app.remember("restored", null) }, peopleHere(app, { tray, now }), caring({ app, tray, now, make: makeRecord, choose: sync.choose, send: () => sender.kick(), download }));
  app.state.insecure = globalThis.isSecureContext ? null : { at: document.querySelector("#field").dataset.secure };
  const onRoute = () => {
    app.route(parseRoute(location.hash, location.pathname), keepSaved);
    keepSaved = false;
    scrollTo(0, 0);
    version.calmNow();
  };

  await readKept(app.state, tray, along);
  await readDrafts(app.state, tray);
  addEventListener("hashchange", onRoute);
  addEventListener("online", () => sender.kick());
  document.addEventListener("visibilitychange", () => {
    if (document.visibilityState !== "visible") return;
    sender.kick();
    version.look();
  });
  onRoute();
  version.start();
  if (cameFromSignIn()) await sync.takeOver();
  sender.kick();
  app.state.persisted = await navigator.storage?.persist?.().catch(() => false);
}

/** Whether somebody has just signed in, perhaps another than this phone knows. */
function cameFromSignIn() {
  try {
    return /^\/in(\/|$)/.test(new URL(document.referrer).pathname);
  } catch {
    return false; // no referrer
  }
}

/** Opens what a label names as soon as its site is on the phone. */
function followTag(app) {
  if (app.state.route.page !== "tag") return;
  const device = app.deviceByTag(app.state.route.tag);
  if (device) location.replace(toDevice(device.id));
}

/** A tab of a browser that clears what a page keeps unless it stands on the home screen: no tray there. Only such browsers say standalone. */
const onlyATab = (nav) => nav.standalone === false && nav.maxTouchPoints > 1;

/** Pages of one phone tell each other that the databases changed. */
function otherPages(changed) {
  const channel = globalThis.BroadcastChannel ? new BroadcastChannel("tripwell-kept") : null;
  if (channel) channel.onmessage = () => { changed().catch(console.error); };
  return { tell: () => channel?.postMessage("changed") };
}

/** Hands a file to the phone: by its share sheet where it takes files (installed apps cannot always download), else as a download. */
async function download(name, parts) {
  const file = new File(parts, name, { type: "application/json" });
  if (navigator.maxTouchPoints > 1 && navigator.canShare?.({ files: [file] })) return navigator.share({ files: [file] });
  const link = Object.assign(document.createElement("a"), { href: URL.createObjectURL(file), download: name });
  link.click();
  setTimeout(() => URL.revokeObjectURL(link.href), 60_000);
}

async function readKept(state, tray, along) {
  for (const name of ["installation", "token", "person", "name", "logs", "instrument", "unfolded", "offset", "last_added", "rounds", "here", "chosen", "former", "backed_up", "people", "server", "heads", "restored"]) state.me[name] = await tray.me(name);
  state.offset = state.me.offset ?? 0;
  const sites = await along.sites();
  state.sites.clear();
  for (const row of sites) state.sites.set(row.log, row);
  state.records = await tray.records();
  state.own = new Set(await tray.recordIds());
  state.photos = (await tray.waitingPhotos()).length;
  state.refusedPhotos = await tray.refusedPhotos();
}

async function readDrafts(state, tray) {
  for (const draft of await tray.drafts()) state.drafts.set(draft.key, draft);
}

/** One page at a time sends for all open ones, where the browser can say so. */
function alone(run) {
  if (!navigator.locks) return run();
  return navigator.locks.request("tripwell-exchange", { ifAvailable: true }, (lock) => (lock ? run() : { state: "busy", retryAfter: 5 }));
}

start().catch((e) => {
  root.textContent = root.dataset.failed;
  console.error(e);
});
