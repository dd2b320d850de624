// The devices of a site as the crew walks them: grouped by room in the snapshot's order, with what is due now and what
// this phone itself has recorded since. The copy of the server's data is never changed; own entries are laid over it. Pure.

import { bareTag } from "./route.mjs";

/** Which tasks an entry counts for: a measured test whose button tripped and reset also meets the button plan. */
export function meets(task, readings) {
  const yes = (code) => readings[code]?.value === "yes";
  return task === "instrument" && yes("button_trips") && yes("button_resets") ? ["instrument", "button"] : [task];
}

/**
 * Own entries that the copy does not hold yet, by device. rows: of the tray, {saved, state, summary:{entry, device, task,
 * day, result, readings, numbers}}; one in state "kept" was in a copy asked for after the server had the record, one
 * "refused" counts nowhere until a manager admits it.
 */
export function overlay(rows) {
  const own = new Map();
  for (const row of rows.toSorted((a, b) => a.saved - b.saved)) {
    if (!row.summary || row.state === "kept" || row.state === "refused") continue;
    const list = own.get(row.summary.device) ?? [];
    list.push({ ...row.summary, saved: row.saved, unsent: row.state !== "sent" });
    own.set(row.summary.device, list);
  }
  return own;
}

/** A device with its last tests and due dates as they stand with the own entries laid over. */
export function withOwn(device, own = []) {
  const last = { ...device.last };
  let due = device.due ?? [];
  for (const e of own) {
    last[e.task] = { entry: e.entry, day: e.day, result: e.result, readings: e.numbers, own: true, unsent: e.unsent };
    const met = e.result === "not-tested" ? [] : meets(e.task, e.readings);
    due = due.filter((d) => !met.includes(d.task));
  }
  return { ...device, last, due };
}

/** Whether a due date wants work on a day: everything but what still lies ahead. */
export const wantsWork = (due, today) => due.state !== "upcoming" || due.due <= today;

/** Whether a device wants a task now. */
export const wants = (device, task, today) => (device.due ?? []).some((d) => d.task === task && wantsWork(d, today));

/** The dates of a device that want work now, worst first. */
export function dueNow(device, today) {
  const order = ["overdue", "never-tested", "in-grace", "due"];
  return (device.due ?? []).filter((d) => wantsWork(d, today))
    .sort((a, b) => order.indexOf(a.state) - order.indexOf(b.state));
}

/** The devices of an open site that want work now. */
export const dueIn = (site) => site.once("due", () => site.devices.filter((d) => dueNow(d, site.today).length > 0));

/** How far along: place of a device among those of its list that want the task, from 1. */
export function placeInRound(devices, id, task, today) {
  const place = { n: 0, of: 0 };
  for (const d of devices) {
    if (d.id !== id && !wants(d, task, today)) continue;
    place.of++;
    if (d.id === id) place.n = place.of;
  }
  return place;
}

/** Whether a device answers to what was typed: a tag, words of its place, its panel and circuit, its kind. */
export function matches(device, place, typed, kindWord = "") {
  const words = typed.trim().toLowerCase().split(/\s+/).filter(Boolean);
  if (words.length === 0) return true;
  const bare = bareTag(typed);
  if (device.tag && bare.length >= 3 && bareTag(device.tag).startsWith(bare)) return true;
  const hay = [place?.name, place?.room, place?.floor, place?.building, device.panel, device.circuit && `${device.panel} / ${device.circuit}`,
    kindWord, device.fields?.make, device.fields?.model].filter(Boolean).join(" ").toLowerCase();
  return words.every((w) => hay.includes(w));
}

/** Groups devices by building, floor and room, in the order given. */
export function grouped(devices, places) {
  const groups = [];
  for (const device of devices) {
    const place = places.get(device.place);
    const name = [place?.building, place?.floor, place?.room].filter(Boolean).join(" · ");
    if (groups.at(-1)?.name !== name) groups.push({ name, devices: [] });
    groups.at(-1).devices.push({ device, place });
  }
  return groups;
}
