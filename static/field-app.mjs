// The state of the field client and everything that changes it. Storage, network, clock, timers and the record maker are
// passed in; views read what this gives and call its actions. What the server holds is never changed here: own entries
// are laid over the copy when it is read.

import { draftKey, isTouched, newDraft, withAnswers, withSeries } from "./draft.mjs";
import { dayIn, showMoment } from "./days.mjs";
import { entryBody, givenOf, summaryOf } from "./entry.mjs";
import { walk } from "./flow.mjs";
import { dueNow, overlay, placeInRound, withOwn } from "./list.mjs";
import { criticalLoads } from "./dark-sweep.mjs";
import { fieldWork } from "./field-doing.mjs";
import { correctionBody } from "./correcting.mjs";
import { nextInWalk } from "./walk-round.mjs";
import { about, judgeWalked, limitSetFor } from "./judging.mjs";
import { backQuestions, leavesOff, stillOff } from "./still-off.mjs";
import { factsOf, withFacts } from "./own-facts.mjs";
import { bareTag, toDevice, toTest } from "./route.mjs";
import { titleOf } from "./field-parts.mjs";

/** parts: {tray, say, draw(app), go(hash), now, make(kind, log, subject, body, at, facts), keepSending()}. */
export function fieldApp(parts) {
  const { tray, say, draw, go, now } = parts;
  const state = { me: {}, sites: new Map(), records: [], own: new Set(), drafts: new Map(), route: { page: "sites" }, line: "empty", offset: 0, busy: true, saving: false, saved: null, trouble: null, persisted: undefined };
  let views = new Map(); // site log → the copy with own entries laid over

  const changed = () => { views = new Map(); draw(app); };
  const corrected = () => now() + (state.offset ?? 0);

  function siteView(log) {
    if (!views.has(log)) {
      const row = state.sites.get(log);
      views.set(log, row ? readSite(row, state.records, dayIn(corrected(), row.snapshot.site.zone)) : null);
    }
    return views.get(log);
  }

  function findDevice(id) {
    for (const log of state.sites.keys()) {
      const site = siteView(log), device = site.device(id);
      if (device) return { site, device, place: site.places.get(device.place) };
    }
    return null;
  }

  const formsFor = (site, device) => site.snapshot.forms.filter((f) => f.kinds.includes(device.kind));
  /** A draft's form as it is put now; null when its device is not on this phone. */
  function walkOf(draft) {
    const found = findDevice(draft.device);
    const form = found && formsFor(found.site, found.device).find((f) => f.task === draft.task);
    return form ? walk(form, draft, givenOf({ device: found.device, form, limitSet: null, instrument: null }), limitSetFor(found.device, form, found.site.snapshot.limit_sets)) : null;
  }

  /** Drafts are kept at every keystroke; typing never waits for it, and a failure is said at once. */
  function putDraft(draft) {
    state.drafts.set(draft.key, draft);
    draw(app);
    tray.putDraft(draft).then(() => {
      if (state.trouble === say("field.draft_not_kept")) { state.trouble = null; draw(app); }
    }, () => { state.trouble = say("field.draft_not_kept"); draw(app); });
  }

  /** key: of a draft that is not the device's own next test (a correction). */
  function openTest(id, task, key = draftKey(id, task)) {
    const found = findDevice(id);
    const form = found && formsFor(found.site, found.device).find((f) => f.task === task);
    if (!form) return null;
    const { site, device, place } = found;
    const instruments = (site.snapshot.instruments ?? []).filter((i) => !i.retired);
    const remembered = instruments.some((i) => i.id === state.me.instrument) ? state.me.instrument : null;
    const draft = state.drafts.get(key) ?? newDraft({ device: id, task, log: site.log, form: form.form, instrument: remembered, now: now() });
    const instrument = instruments.find((i) => i.id === draft.instrument) ?? null;
    const limitSet = limitSetFor(device, form, site.snapshot.limit_sets);
    const given = givenOf({ device, form, limitSet, instrument: form.task === "button" ? null : instrument });
    const walked = walk(form, draft, given, limitSet);
    if (leavesOff(draft, walked)) walked.open.push(...backQuestions(walked).slice(-1).filter((ask) => !walked.open.some((o) => o.ask === ask)).map((ask) => ({ id: ask.reading, ask })));
    const judged = { form, limitSet, given };
    const verdict = judgeWalked(judged, walked);
    return {
      site, device, place, form, draft, instruments, limitSet, given, walked, verdict, today: site.today,
      firstInRoom: !site.devices.some((d) => sameRoom(site, d, place) && Object.values(d.last ?? {}).some((l) => l.day === site.today)),
      round: placeInRound(site.devices, id, task, site.today), next: draft.corrects ? null : nextInWalk(site.devices, id, task, site.today, app.skipped(site)),
      loads: criticalLoads(site.devices, site.places, device),
      about(ask) {
        const said = about(judged, walked, verdict, ask);
        return { ...said, last: lastOf(device.last?.[task], ask, walked.readings), folded: folds(ask, said.bounds) && !(state.me.unfolded ?? []).includes(ask.reading) };
      },
      aboutAt: (ask, at) => about(judged, walked, verdict, ask, at),
    };
  }

  /** Keeps the entry, strictly; only then is it called saved. */
  async function save(test) {
    if (state.saving) return;
    state.saving = true;
    draw(app);
    const { site, device, form, draft, given, walked, verdict } = test;
    const at = now(), day = dayIn(corrected(), site.snapshot.site.zone);
    const title = titleOf(app, device, test.place);
    try {
      const [row] = await tray.keep(site.log, [draft.key], [(facts) => {
        const judged = { result: verdict.result, limit_rev: given.limit_rev ?? 0, judge: parts.judgeVersion };
        const body = draft.corrects ? correctionBody({ draft, readings: walked.readings, series: walked.series, given, was: draft.instrument_was }) : entryBody({ form, given, readings: walked.readings, series: walked.series, person: facts.person, note: draft.note.trim(),
          shown: judged, photos: draft.photos });
        const made = parts.make({ kind: draft.corrects ? "entry.corrected" : "entry.made", log: site.log, subject: draft.corrects ?? device.id, at, body, offset: state.offset ?? 0, ...facts });
        return { clock: made.clock, row: { id: made.id, log: site.log, record: made.record, state: "waiting", saved: at,
          summary: { ...(draft.corrects ? { corrects: true } : {}), ...summaryOf({ entry: draft.corrects ?? made.id, device: device.id, task: form.task, day: draft.corrects ? dayIn(draft.made_at, site.snapshot.site.zone) : day, result: verdict.result, readings: walked.readings }), title } } };
      }], draft.photos ?? []);
      state.own.add(row.id);
      state.photos = (state.photos ?? 0) + (draft.photos?.length ?? 0);
      state.records.push(row);
      state.drafts.delete(draft.key);
      state.saved = { what: title, result: verdict.result };
      state.trouble = null;
      state.saving = false;
      views = new Map();
      go(draft.corrects ? toDevice(device.id) : test.next ? toTest(test.next.id, form.task) : `#/site/${encodeURIComponent(site.snapshot.site.code)}`, { keep: true });
      parts.keepSending();
    } catch (e) {
      state.saving = false;
      state.trouble = say(e?.name === "QuotaExceededError" ? "field.full" : "field.not_kept");
      draw(app);
    }
  }

  /**
   * Keeps register records of one site together, strictly: facts [{kind, subject, body, title}]. drafts: keys that end with
   * them. Resolves to whether they are kept; a failure is said on the page.
   */
  async function write(site, facts, { drafts = [], said } = {}) {
    if (state.saving) return false;
    state.saving = true;
    draw(app);
    const at = now();
    try {
      const rows = await tray.keep(site.log, drafts, facts.map(({ title, summary, ...fact }) => (own) => {
        const made = parts.make({ ...fact, log: site.log, at, offset: state.offset ?? 0, ...own });
        return { clock: made.clock, row: { id: made.id, log: site.log, record: made.record, state: "waiting", saved: at, clock: made.clock,
          ...(summary ? { summary: { ...summary(made.id), title } } : { fact: { ...fact, title: title ?? said } }) } };
      }));
      for (const row of rows) if (row.summary) state.own.add(row.id);
      state.records.push(...rows);
      for (const key of drafts) state.drafts.delete(key);
      state.saved = said ? { what: said } : null;
      state.trouble = null;
      state.saving = false;
      changed();
      parts.keepSending();
      return true;
    } catch (e) {
      state.saving = false;
      state.trouble = say(e?.name === "QuotaExceededError" ? "field.full" : "field.not_kept");
      draw(app);
      return false;
    }
  }

  const app = {
    write, record: (id) => tray.record(id), newId: () => parts.newId(), go,
    remember(name, value) {
      state.me[name] = value;
      tray.setMe(name, value).catch(() => {}); // a convenience only
      draw(app);
    },
    say, state, now, openTest, findDevice, formsFor, save, changed,
    corrected,
    get off() {
      const tests = stillOff([...state.drafts.values()], walkOf).map((o) => ({ ...o, href: toTest(o.device, o.task) }));
      const sweeps = [...state.drafts.values()].filter((d) => d.key.startsWith("dark|") && d.fields?.off && !d.fields.restored).map((d) => ({ device: d.key.slice(5), since: d.fields.off, href: `#/dark/${d.key.slice(5)}` }));
      return [...tests, ...sweeps].map((o) => {
        const found = findDevice(o.device);
        return { href: o.href, what: found ? titleOf(app, found.device, found.place) : "", since: showMoment(app, o.since) };
      });
    },
    get tray() {
      const count = (s) => state.records.filter((r) => r.state === s).length;
      return { waiting: count("waiting"), photos: state.photos ?? 0, refused: count("refused") };
    },
    /** Sites this person has, with what is known of each. */
    sites() {
      return (state.me.logs ?? []).filter((l) => l.code).map((l) => {
        const view = state.sites.has(l.log) ? siteView(l.log) : null;
        return { log: l.log, code: l.code, name: l.name, taken: view?.taken, devices: view?.devices.length ?? 0,
          due: view ? view.devices.filter((d) => dueNow(d, view.today).length > 0).length : 0 };
      });
    },
    siteByCode(code) {
      for (const [log, row] of state.sites) if (row.snapshot.site.code.toLowerCase() === code.toLowerCase()) return siteView(log);
      return null;
    },
    deviceByTag(tag) {
      for (const log of state.sites.keys()) {
        const device = siteView(log).devices.find((d) => d.tag && bareTag(d.tag) === tag);
        if (device) return device;
      }
      return null;
    },
    route(route, keepSaved) {
      state.route = route;
      if (!keepSaved) state.saved = null;
      draw(app);
    },
    answers: (draft, answers, more) => putDraft({ ...withAnswers(draft, answers, now()), ...more }),
    seriesAnswer: (draft, at, code, answer) => putDraft(withSeries(draft, at, code, answer, now())),
    note: (draft, note) => putDraft({ ...draft, note, changed: now() }),
    instrument(draft, id) {
      state.me.instrument = id;
      tray.setMe("instrument", id).catch(() => {}); // only a convenience; the draft below keeps the choice of this test
      putDraft({ ...draft, instrument: id });
    },
    /** An optional question somebody opens stays open on this phone from then on. */
    unfold(ask) {
      state.me.unfolded = [...new Set([...(state.me.unfolded ?? []), ask.reading])];
      tray.setMe("unfolded", state.me.unfolded).catch(() => {});
      draw(app);
    },
    /** The person who signed in to this browser last makes the entries from now on; nobody signed in: sign in first. */
    async somebodyElse() {
      if (!(await parts.takeOver()) && state.line === "signed-out") parts.leave("/in?next=/field");
      else parts.keepSending();
    },
    sendNow: () => parts.keepSending(),
    touched: isTouched,
  };
  return Object.assign(app, fieldWork(app, { ...parts, putDraft, siteView, formsFor, openTest, changed }));
}

/** Optional measurements and long choices no must limit waits for are one line until somebody wants them. */
function folds(ask, bounds) {
  if (ask.required || ask.expected) return false;
  return ask.type === "number" ? bounds?.level !== "must" && ask.reading !== "test_current_ma" : (ask.options?.length ?? 0) > 2;
}

/** Last time's figure of a question, and whether the two compare: trip times do only at the same current (within 2 %). */
function lastOf(last, ask, readings) {
  const value = last?.readings?.[ask.reading];
  if (value === undefined) return undefined;
  const then = last.readings.test_current_ma, now = readings.test_current_ma?.value;
  const comparable = ask.reading !== "trip_time_ms" || then === undefined || (typeof now === "number" && Math.abs(now - then) <= 0.02 * then);
  return { value, day: last.day, at: then, comparable };
}

function sameRoom(site, device, place) {
  const other = site.places.get(device.place);
  return Boolean(place && other) && ["building", "floor", "room"].every((k) => place[k] === other[k]);
}

/** Where things stand in a copy, by id; a copy never changes, so this is made once for each. */
const indexes = new WeakMap();
function indexOf(snapshot) {
  if (!indexes.has(snapshot)) indexes.set(snapshot, { places: new Map(snapshot.places.map((p) => [p.id, p])), at: new Map(snapshot.devices.map((d, i) => [d.id, i])) });
  return indexes.get(snapshot);
}

/** A site's copy as the pages read it, own entries laid over. */
function readSite(row, records, today) {
  const { snapshot, log, taken } = row;
  const mine = records.filter((r) => r.log === log), facts = factsOf(mine), copy = indexOf(snapshot);
  const { places, devices: read } = withFacts(snapshot, facts, copy.places);
  const devices = read.slice(), at = facts.length === 0 ? copy.at : new Map(read.map((d, i) => [d.id, i]));
  for (const [id, own] of overlay(mine)) if (at.has(id)) devices[at.get(id)] = withOwn(devices[at.get(id)], own);
  return { log, taken, snapshot, today, devices, places, device: (id) => devices[at.get(id)] };
}
