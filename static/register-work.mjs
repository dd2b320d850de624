// The records of work on the register: a device added, a label bound, moved or swapped, a device moved or replaced. Each
// function gives the facts [{kind, subject, body}] of one step, to be kept together. Pure; ids are passed in.

import { changedFields, filledFields } from "./register-fields.mjs";

/** What a label of a device names: the place of a fixed one, a portable item itself. */
export const labelSubject = (device) => device.place ?? device.id;

const withSeen = (set, thing) => (thing?.seen ? { set, seen: thing.seen } : { set });

/** The place of a list that is the same spot of the same room, or undefined. */
export function samePlace(places, typed) {
  const text = (p) => ["building", "floor", "room", "name"].map((f) => (p[f] ?? "").trim().toLowerCase()).join("\n");
  const wanted = text(typed);
  return [...places].find((p) => text(p) === wanted);
}

/** A device found on site, in a spot that may be new. typed: {place: {building, floor, room, name}, device: {kind, circuit, …}, tag}. */
export function addFacts({ typed, places, newId }) {
  const facts = [], place = filledFields(typed.place), device = newId();
  let spot = null;
  if (Object.keys(place).length > 0) {
    const known = place.name ? samePlace(places, place) : undefined;
    spot = known?.id ?? newId();
    if (!known) facts.push({ kind: "place.registered", subject: spot, body: { set: place } });
  }
  facts.push({ kind: "device.registered", subject: device, body: { set: { ...filledFields(typed.device), ...(spot ? { place: spot } : {}) } } });
  if (typed.tag) facts.push({ kind: "tag.bound", subject: spot ?? device, body: { tag: typed.tag } });
  return { facts, device };
}

const freed = (device, tag) => ({ kind: "tag.freed", subject: labelSubject(device), body: { tag } });
const bound = (device, tag) => ({ kind: "tag.bound", subject: labelSubject(device), body: { tag } });

/** A label put on a device; holder is who has it now, if anybody. Both keep their histories: only what the labels name changes. */
export function bindFacts(device, tag, holder) {
  const facts = [];
  if (holder) facts.push(freed(holder, tag));
  if (device.tag && device.tag !== tag) facts.push(freed(device, device.tag));
  facts.push(bound(device, tag));
  return facts;
}

/** The labels of two devices change places. */
export function swapFacts(device, holder) {
  return [freed(device, device.tag), freed(holder, holder.tag), bound(device, holder.tag), bound(holder, device.tag)];
}

/** The spot itself is called otherwise; null where nothing differs. */
export function renameFacts(place, typed) {
  const set = changedFields(place, typed);
  return set && [{ kind: "place.set", subject: place.id, body: withSeen(set, place) }];
}

/** The device sits in another spot now; null where it is the same one. */
export function moveFacts({ device, typed, places, newId }) {
  const known = samePlace(places, typed);
  if (known && known.id === device.place) return null;
  const spot = known?.id ?? newId();
  return [...(known ? [] : [{ kind: "place.registered", subject: spot, body: { set: filledFields(typed) } }]),
    { kind: "device.set", subject: device.id, body: withSeen({ place: spot }, device) }];
}

/** What the old device leaves to the one in its place; make, model, serial and the day are the new one's own. */
const HANDED_ON = ["place", "circuit", "rating_a", "nominal_v", "rated_residual_ma", "delayed", "waveform", "equipment_ground", "faces", "limit_set", "fed_by", "where", "at_site"];

/** A new device in the place of an old one, on a day. typed: {kind, make, model, serial}; a portable item's label goes along. */
export function replaceFacts({ device, typed, reason, on, newId }) {
  const now = newId(), kept = {};
  for (const f of HANDED_ON) if (device.fields?.[f] !== undefined) kept[f] = device.fields[f];
  const facts = [{ kind: "device.registered", subject: now, body: { set: { ...kept, kind: device.kind, installed: on, ...filledFields(typed) } } },
    { kind: "device.replaced", subject: device.id, body: { with: now, reason, on } }];
  if (!device.place && device.tag) facts.push(freed(device, device.tag), { kind: "tag.bound", subject: now, body: { tag: device.tag } });
  return { facts, device: now };
}

/** What feeds a device, as found by tripping: the map of what goes dark. protector null: nothing known feeds it. */
export const feedFacts = (device, protector) => [{ kind: "device.set", subject: device.id, body: withSeen({ fed_by: protector?.id ?? null }, device) }];

/** Devices the map says a protector feeds. */
export const fedBy = (devices, protector) => devices.filter((d) => d.fields?.fed_by === protector);
