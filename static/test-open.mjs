// A test as its page shows it: the draft, its form walked under what is answered so far, the verdict, and where in the
// round it stands.

import { draftKey, newDraft } from "./draft.mjs";
import { criticalLoads } from "./dark-sweep.mjs";
import { givenOf } from "./entry.mjs";
import { walk } from "./flow.mjs";
import { about, judgeWalked, limitSetFor } from "./judging.mjs";
import { roomOf } from "./own-facts.mjs";
import { backQuestions, leavesOff } from "./still-off.mjs";

/** testOpener(app, now) → openTest(device id, task, key of a draft that is not the device's own next test), null where it has no such form. */
export function testOpener(app, now) {
  return function openTest(id, task, key = draftKey(id, task)) {
    const { state } = app, found = app.findDevice(id);
    const form = found && app.formsFor(found.site, found.device).find((f) => f.task === task);
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
      site, device, place, form, draft, instruments, limitSet, given, walked, verdict, today: site.today, mark: markFor(site, device, task),
      firstInRoom: site.once(`first ${id}`, () => firstInRoom(site, place)),
      ...app.placeOnWalk(site, { device: id, task }, Boolean(draft.corrects)),
      loads: site.once(`loads ${id}`, () => criticalLoads(site.devices, site.places, device)),
      about(ask) {
        const said = about(judged, walked, verdict, ask);
        return { ...said, last: lastOf(device.last?.[task], ask, walked.readings), folded: folds(ask, said.bounds) && !(state.me.unfolded ?? []).includes(ask.reading) };
      },
      aboutAt: (ask, at) => about(judged, walked, verdict, ask, at),
    };
  };
}

/** The mark put on today after a test: {word, colour, from, until}; undefined where none is. */
export function markFor({ snapshot, today }, device, task) {
  return snapshot.marks?.find((m) => m.kind === device.kind && m.task === task)?.periods.find((p) => p.from <= today && today <= p.until);
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

/** Whether nothing has been tested today in a room. */
function firstInRoom(site, place) {
  const room = place && roomOf(place);
  return !site.devices.some((d) => Object.values(d.last ?? {}).some((l) => l.day === site.today) && d.place && roomOf(site.places.get(d.place)) === room);
}
