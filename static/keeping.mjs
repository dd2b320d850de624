// Keeps what a person made, strictly: an entry with the end of its draft, or register records of one step together. Only
// when the transaction is complete on disk is anything called saved; a failure is said on the page and loses nothing.

import { correctionBody } from "./correcting.mjs";
import { dayIn } from "./days.mjs";
import { entryBody, summaryOf } from "./entry.mjs";
import { toDevice, toRound, toTest } from "./route.mjs";
import { titleOf } from "./field-parts.mjs";

/** Where a saved test leads before the round goes on: from a fail to making it safe; from the full test of a new device to what
 *  hangs behind it. */
function detour(app, site, device, verdict) {
  if (verdict.result === "fail") return `#/failed/${device.id}`;
  const passed = verdict.result === "pass" || verdict.result === "conditional-pass";
  return passed && device.replaces && app.feeds(site, device).length > 0 ? `#/dark/${device.id}` : null;
}

const SLOW = 150; // ms after which the page says that it is still keeping

/** keeping(app, {tray, make, now, judgeVersion, soon(fn, ms), keepSending()}) → {save, write}. */
export function keeping(app, { tray, make, now, judgeVersion, soon, keepSending }) {
  const { state, say } = app;

  /** One at a time; resolves to whether work() kept what it was to keep. */
  async function once(work) {
    if (state.saving) return false;
    state.saving = true;
    soon(() => { if (state.saving) app.draw(); }, SLOW);
    try {
      await work();
      keepSending();
      return true;
    } catch (e) {
      state.saving = false;
      state.trouble = say(e?.name === "QuotaExceededError" ? "field.full" : "field.not_kept");
      app.draw();
      return false;
    }
  }

  function kept(saved) {
    Object.assign(state, { saved, trouble: null, saving: false });
  }

  const entryOf = ({ form, draft, given, walked, verdict, onRound }, person) => (draft.corrects
    ? correctionBody({ draft, readings: walked.readings, series: walked.series, given, was: draft.instrument_was })
    : entryBody({ form, given, readings: walked.readings, series: walked.series, person, note: draft.note.trim(), photos: draft.photos, round: onRound?.id,
      shown: { result: verdict.result, limit_rev: given.limit_rev ?? 0, judge: judgeVersion } }));

  /** The entry of a test, as app.openTest gives it; then on to the next outlet. */
  const save = (test) => once(async () => {
    const { site, device, form, draft, walked, verdict } = test, zone = site.snapshot.site.zone;
    const at = now(), title = titleOf(app, device, test.place);
    const [row] = await tray.keep(site.log, [draft.key], [(facts) => {
      const made = make({ kind: draft.corrects ? "entry.corrected" : "entry.made", log: site.log, subject: draft.corrects ?? device.id, at, body: entryOf(test, facts.person), offset: state.offset ?? 0, ...facts });
      const summary = summaryOf({ entry: draft.corrects ?? made.id, device: device.id, task: form.task, day: dayIn(draft.corrects ? draft.made_at : app.corrected(), zone), result: verdict.result, readings: walked.readings });
      return { clock: made.clock, row: { id: made.id, log: site.log, record: made.record, state: "waiting", saved: at, summary: { ...(draft.corrects ? { corrects: true } : {}), ...summary, title } } };
    }], draft.photos ?? []);
    state.own.add(row.id);
    state.photos = (state.photos ?? 0) + (draft.photos?.length ?? 0);
    state.records.push(row);
    state.drafts.delete(draft.key);
    kept({ what: title, result: verdict.result });
    app.lay(site.log, device.id);
    state.after = draft.corrects ? toDevice(device.id) : test.next ? toTest(test.next.device, test.next.task) : toRound(site.snapshot.site.code, test.onRound?.id);
    app.go((draft.corrects ? null : detour(app, site, device, verdict)) ?? state.after, { keep: true });
  });

  /**
   * Register records of one site together: facts [{kind, subject, body, title, summary(id)}]; summary where one is an entry.
   * drafts: keys that end with them; photos: names of those the first record names. Resolves to whether they are kept.
   */
  const write = (site, facts, { drafts = [], photos = [], said } = {}) => once(async () => {
    const at = now();
    const rows = await tray.keep(site.log, drafts, facts.map(({ title, summary, ...fact }) => (own) => {
      const made = make({ ...fact, log: site.log, at, offset: state.offset ?? 0, ...own });
      return { clock: made.clock, row: { id: made.id, log: site.log, record: made.record, state: "waiting", saved: at, clock: made.clock,
        ...(summary ? { summary: { ...summary(made.id), title } } : { fact: { ...fact, title: title ?? said } }) } };
    }), photos);
    state.photos = (state.photos ?? 0) + photos.length;
    for (const row of rows) if (row.summary) state.own.add(row.id);
    state.records.push(...rows);
    for (const key of drafts) state.drafts.delete(key);
    kept(said ? { what: said } : null);
    app.changed();
  });

  return { save, write };
}
