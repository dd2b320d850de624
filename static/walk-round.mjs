// How far a walk through a site is: what is done today, what is left, what was passed over, and where somebody must come
// back because nothing could be tested. Pure.

import { dueNow, wants } from "./list.mjs";
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

/** The devices of the room a device is in, in walking order. */
export function roomMates(site, device) {
  const room = roomOf(site.places.get(device.place));
  return device.place ? site.devices.filter((d) => d.place && roomOf(site.places.get(d.place)) === room) : [device];
}
