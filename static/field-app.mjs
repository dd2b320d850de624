// The state of the field client and what changes it. Storage, network, clock, timers and the record maker are passed in;
// views read what this gives and call its actions.

import { isTouched, withAnswers, withSeries } from "./draft.mjs";
import { dayIn, showMoment } from "./days.mjs";
import { givenOf } from "./entry.mjs";
import { fieldWork } from "./field-doing.mjs";
import { titleOf } from "./field-parts.mjs";
import { walk } from "./flow.mjs";
import { limitSetFor } from "./judging.mjs";
import { keeping } from "./keeping.mjs";
import { dueIn } from "./list.mjs";
import { bareTag, toTest } from "./route.mjs";
import { openSites } from "./site-view.mjs";
import { stillOff } from "./still-off.mjs";
import { testOpener } from "./test-open.mjs";

/** parts: {tray, say, draw(app), go(hash), now, soon(fn, ms), make(kind, log, subject, body, at, facts), keepSending()}. */
export function fieldApp(parts) {
  const { tray, say, go, now } = parts;
  const state = { me: {}, sites: new Map(), records: [], own: new Set(), drafts: new Map(), route: { page: "sites" }, line: "empty", offset: 0, busy: true, saving: false, saved: null, trouble: null, persisted: undefined };
  const open = openSites();

  const draw = () => parts.draw(app);
  const changed = () => { open.stale(); draw(); };
  const corrected = () => now() + (state.offset ?? 0);
  const siteView = (log) => open.get(log, state.sites.get(log), state.records, (zone) => dayIn(corrected(), zone));
  const formsFor = (site, device) => site.snapshot.forms.filter((f) => f.kinds.includes(device.kind));

  function findDevice(id) {
    for (const log of state.sites.keys()) {
      const site = siteView(log), device = site.device(id);
      if (device) return { site, device, place: site.places.get(device.place) };
    }
    return null;
  }

  /** A draft's form as it is put now; null when its device is not on this phone. */
  function walkOf(draft) {
    const found = findDevice(draft.device);
    const form = found && formsFor(found.site, found.device).find((f) => f.task === draft.task);
    return form ? walk(form, draft, givenOf({ device: found.device, form, limitSet: null, instrument: null }), limitSetFor(found.device, form, found.site.snapshot.limit_sets)) : null;
  }

  /** Drafts are kept at every keystroke; typing never waits for it, and a failure is said at once. */
  function putDraft(draft) {
    state.drafts.set(draft.key, draft);
    draw();
    tray.putDraft(draft).then(() => {
      if (state.trouble === say("field.draft_not_kept")) { state.trouble = null; draw(); }
    }, () => { state.trouble = say("field.draft_not_kept"); draw(); });
  }

  /** What is a convenience only: a failure to keep it is nobody's trouble. */
  function remember(name, value) {
    state.me[name] = value;
    tray.setMe(name, value).catch(() => {});
    draw();
  }

  const app = {
    record: (id) => tray.record(id), newId: () => parts.newId(), go, remember, draw, say, state, now, findDevice, formsFor, changed, corrected,
    /** An entry was just made at a device. */
    lay: (log, device) => open.lay(log, device, state.records),
    get off() {
      const tests = stillOff([...state.drafts.values()], walkOf).map((o) => ({ ...o, href: toTest(o.device, o.task) }));
      const sweeps = [...state.drafts.values()].filter((d) => d.key.startsWith("dark|") && d.fields?.off && !d.fields.restored).map((d) => ({ device: d.key.slice(5), since: d.fields.off, href: `#/dark/${d.key.slice(5)}` }));
      return [...tests, ...sweeps].map((o) => {
        const found = findDevice(o.device);
        return { href: o.href, what: found ? titleOf(app, found.device, found.place) : "", since: showMoment(app, o.since) };
      });
    },
    get tray() {
      const count = (s) => state.records.reduce((n, r) => n + Number(r.state === s), 0);
      return { waiting: count("waiting"), photos: state.photos ?? 0, refused: count("refused") + (state.refusedPhotos?.length ?? 0) };
    },
    /** Sites this person has, with what is known of each. */
    sites() {
      return (state.me.logs ?? []).filter((l) => l.code).map((l) => {
        const view = state.sites.has(l.log) ? siteView(l.log) : null;
        return { log: l.log, code: l.code, name: l.name, taken: view?.taken, devices: view?.devices.length ?? 0, due: view ? dueIn(view).length : 0 };
      });
    },
    openSites: () => [...state.sites.keys()].map(siteView),
    siteByCode(code) {
      for (const [log, row] of state.sites) if (row.snapshot.site.code.toLowerCase() === code.toLowerCase()) return siteView(log);
      return null;
    },
    deviceByTag: (tag) => app.findByTag(tag)?.device ?? null,
    findByTag(tag) {
      for (const log of state.sites.keys()) {
        const site = siteView(log), device = site.once("tags", () => new Map(site.devices.filter((d) => d.tag).map((d) => [bareTag(d.tag), d]).reverse())).get(tag);
        if (device) return { site, device, place: site.places.get(device.place) };
      }
      return null;
    },
    route(route, keepSaved) {
      state.route = route;
      if (!keepSaved) state.saved = null;
      const at = route.page === "site" || route.page === "round" ? app.siteByCode(route.code ?? route.a)?.log : undefined;
      if (at && at !== state.me.here) remember("here", at); // the site this phone works at
      draw();
    },
    answers: (draft, answers, more) => putDraft({ ...withAnswers(draft, answers, now()), ...more }),
    seriesAnswer: (draft, at, code, answer) => putDraft(withSeries(draft, at, code, answer, now())),
    note: (draft, note) => putDraft({ ...draft, note, changed: now() }),
    instrument(draft, id) {
      remember("instrument", id);
      putDraft({ ...draft, instrument: id });
    },
    /** An optional question somebody opens stays open on this phone from then on. */
    unfold: (ask) => remember("unfolded", [...new Set([...(state.me.unfolded ?? []), ask.reading])]),
    /** The person who signed in to this browser last makes the entries from now on; where that is nobody else, somebody signs in. */
    async somebodyElse() {
      const before = state.me.person, known = await parts.takeOver();
      if (known ? state.me.person === before : state.line === "signed-out") parts.leave("/in?other=1&next=/field");
      else parts.sendNow();
    },
    sendNow: () => parts.sendNow(),
    touched: isTouched,
  };
  app.openTest = testOpener(app, now);
  Object.assign(app, keeping(app, parts));
  return Object.assign(app, fieldWork(app, { ...parts, putDraft, siteView, formsFor, openTest: app.openTest, changed }));
}
