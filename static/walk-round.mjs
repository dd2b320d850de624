// How far a walk through a site is: what is done today, what is left, what was passed over, and where somebody must come
// back because nothing could be tested. Pure.

import { dueNow, meets, wants } from "./list.mjs";
import { roomOf } from "./own-facts.mjs";

/** Whether nothing could be tested at a device on a day: locked, dead circuit. It stays due, and is not walked into again today. */
export const couldNot = (device, task, today) => device.last?.[task]?.result === "not-tested" && device.last[task].day === today;

/** Devices to come back to: something is due, and the newest try of it found nothing to test. */
export const toReturn = (devices, today) => devices.filter((d) => dueNow(d, today).some((due) => d.last?.[due.task]?.result === "not-tested"));

/** Whether the walk still leads to a device for a task: due, not tried in vain today, not passed over. skipped: Set of device ids. */
export const walksTo = (device, task, today, skipped) => wants(device, task, today) && !couldNot(device, task, today) && !skipped.has(device.id);

/** The next device the walk leads to after one, once round; null when none is left. */
export function nextInWalk(devices, from, task, today, skipped) {
  const start = devices.findIndex((d) => d.id === from);
  for (let i = 1; i < devices.length; i++) {
    const d = devices[(start + i) % devices.length];
    if (walksTo(d, task, today, skipped)) return d;
  }
  return null;
}

/** {done, left, skipped, back} of a site's devices on a day, over all tasks: each device counts once. */
export function walkCounts(devices, today, skipped) {
  const out = { done: 0, left: 0, skipped: 0, back: 0 };
  for (const d of devices) {
    const due = dueNow(d, today);
    if (due.some((x) => couldNot(d, x.task, today))) out.back++;
    else if (due.length > 0 && skipped.has(d.id)) out.skipped++;
    else if (due.length > 0) out.left++;
    else if (Object.values(d.last ?? {}).some((l) => l.day === today && l.result !== "not-tested")) out.done++;
  }
  return out;
}

/** walkCounts and toReturn of an open site. */
export const countsOf = (site, skipped) => site.once(`counts ${[...skipped].join()}`, () => walkCounts(site.devices, site.today, skipped));
export const backOf = (site) => site.once("back", () => toReturn(site.devices, site.today));

/** Devices the walk still leads to, for any task. */
export const leftOf = (site, skipped) => site.devices.filter((d) => dueNow(d, site.today).some((x) => walksTo(d, x.task, site.today, skipped)));

/** The devices of the room a device is in, in walking order. */
export function roomMates(site, device) {
  const room = roomOf(site.places.get(device.place));
  return device.place ? site.devices.filter((d) => d.place && roomOf(site.places.get(d.place)) === room) : [device];
}

/**
 * Rounds made in the office as they stand on this phone: own tests and own words laid over those of the copy. rows: of the
 * tray, of that site. Those this person ended, or that were given to others, are left out. offset: ms the server's clock is ahead.
 * walk: what this phone keeps of the one it walks, {id, given, taken}: of a round a colleague handed over only what was taken is walked
 * here, and what was handed on is not.
 */
export function roundsHere(rounds, rows, person, offset, walk = {}) {
  const handed = walk.taken?.length > 0 ? walk.id : undefined;
  const ended = new Set(rows.filter((r) => r.fact?.kind === "round.closed" && r.state !== "refused").map((r) => r.fact.subject));
  return (rounds ?? [])
    .filter((r) => !ended.has(r.id) && (r.id === handed || (!r.closed?.includes(person) && (!r.people?.length || r.people.includes(person)))))
    .map((r) => ({ ...r, stops: shared(stopsNow(r, rows, offset), r.id === walk.id ? walk : {}) }));
}

/** The stops of a round that are walked here. */
function shared(stops, { taken = [], given = [] }) {
  return stops.filter((s) => taken.length === 0 || taken.includes(s.device)).map((s) => (s.state === "" && given.includes(s.device) ? { ...s, state: "given" } : s));
}

/** The stops of a round, each {device, task, state}: "" is left, back is to come back to; given: a colleague walks it. */
function stopsNow(round, rows, offset) {
  const own = rows.filter((r) => r.summary && !r.summary.corrects && r.state !== "kept" && r.state !== "refused" && r.saved + offset >= round.made);
  return round.stops.map((stop) => {
    let state = stop.state === "passed" ? "" : (stop.state ?? "");
    for (const { summary } of own) {
      if (summary.device !== stop.device) continue;
      const says = summary.result !== "not-tested" && summary.result !== "incomplete";
      if (says && meets(summary.task, summary.readings).includes(stop.task)) state = "done";
      else if (summary.task === stop.task && state !== "done") state = "back";
    }
    return { ...stop, state };
  });
}

const sameStop = (a, b) => a.device === b.device && a.task === b.task;

/** Why a stop was passed over, undefined where it was not. passed: [{device, task, reason}]. */
export const passedBy = (passed, stop) => (passed ?? []).find((p) => sameStop(p, stop))?.reason;

/** The stop a round leads to after another (undefined: the first), once round; undefined when none is left. */
export function nextStop(stops, after, passed) {
  const start = after ? stops.findIndex((s) => sameStop(s, after)) : -1;
  for (let i = 1; i <= stops.length; i++) {
    const stop = stops[(start + i) % stops.length];
    if (!(after && sameStop(stop, after)) && stopsLeft([stop], passed).length > 0) return stop;
  }
  return undefined;
}

/** The stops a round still leads to. */
export const stopsLeft = (stops, passed) => stops.filter((s) => s.state === "" && !passedBy(passed, s));

/** {done, left, skipped, back} of a round's stops; what a colleague walks counts as passed over here. */
export function roundCounts(stops, passed) {
  const out = { done: 0, left: 0, skipped: 0, back: 0 };
  for (const s of stops) out[s.state === "done" || s.state === "back" ? s.state : s.state === "given" || passedBy(passed, s) ? "skipped" : "left"]++;
  return out;
}

/** What must be known before TEST at the places of a round: [{who, load, from, until, names}], each said once. */
export function tellFirst(places) {
  const list = [];
  for (const p of places) {
    if (!p || !(p.whom_to_tell || p.critical_load || p.test_from)) continue;
    const said = list.find((o) => o.who === p.whom_to_tell && o.load === p.critical_load && o.from === p.test_from && o.until === p.test_until);
    if (!said) list.push({ who: p.whom_to_tell, load: p.critical_load, from: p.test_from, until: p.test_until, names: [p.name] });
    else if (!said.names.includes(p.name)) said.names.push(p.name);
  }
  return list;
}
