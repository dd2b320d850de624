// What the pages of work do: search, labels, drafts of a page, rounds, whole rooms, sweeps, corrections. Laid beside the
// app's own state and actions.

import { dayIn } from "./days.mjs";
import { correctionDraft, correctionKey } from "./correcting.mjs";
import { darkEntry, darkForm, sweepFacts } from "./dark-sweep.mjs";
import { entryBody, summaryOf } from "./entry.mjs";
import { titleOf } from "./field-parts.mjs";
import { limitSetFor } from "./judging.mjs";
import { dueNow } from "./list.mjs";
import { fedBy } from "./register-work.mjs";
import { MOST_PHOTOS } from "./photo.mjs";
import { lockedEntry } from "./room-locked.mjs";
import { walking } from "./walking.mjs";

/** app: the state's readers and `write`; parts: what the app itself was given, with its own inner functions. */
export function fieldWork(app, parts) {
  const { state, say } = app, { tray, now, siteView, formsFor } = parts;

  function pageDraft(key) {
    return state.drafts.get(key)?.fields;
  }

  /** An entry made without its own page: of a locked room, of an outlet that went dark. */
  function entryFact(site, device, form, made) {
    const { given, readings, series, verdict } = made, day = dayIn(app.corrected(), site.snapshot.site.zone);
    return { kind: "entry.made", subject: device.id, title: titleOf(app, device, site.places.get(device.place)),
      body: entryBody({ form, given, readings, series, person: state.me.person, note: made.note ?? "", shown: { result: verdict.result, limit_rev: given.limit_rev ?? 0, judge: parts.judgeVersion } }),
      summary: (id) => summaryOf({ entry: id, device: device.id, task: form.task, day, result: verdict.result, readings }) };
  }

  const setOf = (site, device, form) => limitSetFor(device, form, site.snapshot.limit_sets);

  return {
    ...walking(app, parts),
    pageDraft,
    /** Devices of all sites that answer to test(device, place), at most a number. */
    search(test, most) {
      const found = [];
      for (const log of state.sites.keys()) {
        const site = siteView(log);
        for (const device of site.devices) {
          const place = site.places.get(device.place);
          if (test(device, place)) found.push({ site, device, place });
          if (found.length >= most) return found;
        }
      }
      return found;
    },
    titleById(id) {
      const found = app.findDevice(id);
      return found ? titleOf(app, found.device, found.place) : "";
    },
    formFor: (site, kind, task) => formsFor(site, { kind }).sort((a, b) => Number(b.task === task) - Number(a.task === task))[0],
    feeds: (site, device) => fedBy(site.devices, device.id).map((d) => ({ device: d, place: site.places.get(d.place) })),
    /** What is typed on a page of work is kept like a test's draft, until the page's records are. */
    setPageDraft: (key, site, fields) => parts.putDraft({ key, device: null, task: "page", log: site.log, form: "", started: now(), changed: now(), answers: {}, series: [], note: "", fields, photos: state.drafts.get(key)?.photos }),

    /** One reason for every due test of these devices. */
    keepLocked(site, devices, reason, room) {
      const facts = devices.flatMap((device) => dueNow(device, site.today).map((due) => formsFor(site, device).find((f) => f.task === due.task)).filter(Boolean)
        .map((form) => entryFact(site, device, form, lockedEntry({ device, form, limitSet: setOf(site, device, form), reason }))));
      return app.write(site, facts, { said: say("walk.room_kept", { what: room }) });
    },

    /** What went dark behind a protector: an entry for each, its place on the map, and a defect where protection was lost. */
    keepDark(site, protector, rows, key) {
      const made = rows.filter((r) => r.said).map((r) => ({ ...r, form: darkForm(site.snapshot.forms, r.device) })).filter((r) => r.form)
        .map((r) => ({ ...r, entry: darkEntry({ device: r.device, form: r.form, limitSet: setOf(site, r.device, r.form), said: r.said }) })).filter((r) => r.entry);
      const entries = made.map((r) => entryFact(site, r.device, r.form, r.entry)), failed = new Set(made.filter((r) => r.said === "live").map((r) => r.device.id));
      const what = app.titleById(protector.id);
      const facts = sweepFacts({ rows, protector, devices: site.devices, words: (d) => say("dark.defect", { what: app.titleById(d.id), protector: what }), newId: app.newId, fails: (d) => failed.has(d.id) });
      return app.write(site, [...facts.map((f) => ({ ...f, title: what })), ...entries], { drafts: [key], said: say("dark.kept", { what }) });
    },

    /** Opens a correction of an entry of one's own, made here or, with a line, on another phone. Resolves to null, or words for why not. */
    async openCorrection(entry) {
      if (state.drafts.has(correctionKey(entry))) return null;
      const row = await tray.record(entry), there = row?.summary ? null : await parts.entryOf(entry);
      if (!row?.summary && !there) return "correct.not_here";
      const record = there?.record ?? row.record, made = JSON.parse(record);
      if (made.by !== state.me.person) return "correct.not_yours";
      const here = state.records.findLast((r) => r.summary?.corrects && r.summary.entry === entry)?.record, newer = here ?? there?.newer;
      const draft = correctionDraft({ record, newer: newer && JSON.parse(newer).body, task: made.body.form.split("/")[1], now: now() });
      parts.putDraft({ ...draft, instrument_was: draft.instrument });
      return null;
    },
    correction(entry) {
      const draft = state.drafts.get(correctionKey(entry));
      return draft ? parts.openTest(draft.device, draft.task, draft.key) : null;
    },
    photo: (sha) => tray.photo(sha),
    /** begin: makes the draft of a page that has none yet. */
    async addPhoto(key, { sha256, blob }, begin = () => {}) {
      await tray.putPhoto({ sha256, blob, state: "draft", saved: now() });
      if (!state.drafts.has(key)) begin();
      const draft = state.drafts.get(key) ?? parts.openTest(...key.split("|"))?.draft;
      if (draft) parts.putDraft({ ...draft, photos: [...new Set([...(draft.photos ?? []), sha256])].slice(0, MOST_PHOTOS), changed: now() });
    },
    removePhoto(key, sha) {
      const draft = state.drafts.get(key);
      if (draft) parts.putDraft({ ...draft, photos: (draft.photos ?? []).filter((p) => p !== sha), changed: now() });
      tray.dropPhoto(sha).catch(() => {}); // room only; nothing names it any more
    },
    reason: (draft, reason) => parts.putDraft({ ...draft, reason, changed: now() }),
  };
}
