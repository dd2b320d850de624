// What this phone itself wrote into the register since its copy was taken, laid over the copy when it is read: things
// registered, moved, replaced, labels bound. The copy is never changed. Pure.

import { setsFields } from "./register-fields.mjs";

/** The facts among a site's rows of the tray that its copy does not hold yet, in the order they were made. */
export function factsOf(rows) {
  return rows.filter((r) => r.fact && r.state !== "kept" && r.state !== "refused").sort((a, b) => a.saved - b.saved || (a.n ?? 0) - (b.n ?? 0)).map((r) => ({ ...r.fact, clock: r.clock }));
}

/**
 * withFacts(snapshot, facts) → {places: Map id → place, devices in walking order}. facts: [{kind, subject, body, clock}].
 * Without facts the copy's own lists are given back.
 */
export function withFacts(snapshot, facts, places) {
  if (facts.length === 0) return { places, devices: snapshot.devices };
  const site = { places: new Map(places), devices: new Map(snapshot.devices.map((d) => [d.id, d])), added: [], circuits: circuitsOf(snapshot.devices), known: new Set(snapshot.devices.map((d) => d.id)) };
  for (const fact of facts) apply[fact.kind]?.(site, fact);
  return { places: site.places, devices: walking(site) };
}

const apply = {
  "place.registered": (site, { subject, body, clock }) => site.places.set(subject, { ...site.places.get(subject), id: subject, name: "", ...body.set, seen: clock }),
  "place.set": (site, { subject, body, clock }) => {
    const place = site.places.get(subject);
    if (place) site.places.set(subject, { ...place, ...body.set, seen: clock });
  },
  "device.registered": (site, { subject, body, clock }) => {
    if (!site.known.has(subject) && !site.added.includes(subject)) site.added.push(subject);
    setDevice(site, { id: subject, due: [], ...site.devices.get(subject) }, body.set, clock);
    site.devices.get(subject).tag ??= tagAt(site, body.set.place, subject);
  },
  "device.set": (site, { subject, body, clock }) => {
    const before = site.devices.get(subject);
    if (!before) return;
    setDevice(site, before, body.set, clock);
    const after = site.devices.get(subject);
    if (before.place !== after.place) {
      after.tag = tagAt(site, after.place, subject);
      if (site.known.delete(subject)) site.added.push(subject); // walked in its new room from now on
    }
  },
  "defect.opened": (site, { subject, body, clock }) => {
    const device = site.devices.get(body.device);
    const one = { id: subject, cause: body.cause ?? "by-hand", severity: body.severity ?? "unsafe", state: "open", opened: Number(BigInt(`0x${clock}`) >> 16n), text: body.text, due: body.due ?? "", parts: body.parts, own: true };
    if (device) withDefect(site, body.device, { defects: [...(device.defects ?? []), one] });
  },
  "defect.made_safe": (site, { body }) => saidOfAll(site, body.device, { made_safe: body.how }, { safe: body.how }),
  "defect.repaired": (site, { body }) => saidOfAll(site, body.device, { repaired: body.how }, { repaired: true }),
  "device.retired": (site, { subject }) => site.devices.delete(subject),
  "device.replaced": (site, { subject, body }) => {
    const old = site.devices.get(subject), now = site.devices.get(body.with);
    if (!old || !now) return site.devices.delete(subject);
    const stands = { ...now, tag: now.tag ?? old.tag, due: old.due, replaces: subject };
    site.devices.delete(now.id);
    site.devices = new Map([...site.devices].map(([id, d]) => (id === subject ? [now.id, stands] : [id, d]))); // where the old one stood
    site.added = site.added.filter((id) => id !== now.id);
  },
  "tag.bound": (site, { subject, body }) => eachHolder(site, subject, (d) => { d.tag = body.tag; }),
  "tag.freed": (site, { subject, body }) => eachHolder(site, subject, (d) => { if (d.tag === body.tag) d.tag = undefined; }),
};

function withDefect(site, id, said) {
  const device = site.devices.get(id);
  if (device) site.devices.set(id, { ...device, ...said });
}

/** What is said of everything open at a device at that time; defects opened here afterwards are not meant. */
function saidOfAll(site, id, said, each) {
  const own = (site.devices.get(id)?.defects ?? []).map((d) => (d.own ? { ...d, ...each } : d));
  withDefect(site, id, own.length > 0 ? { ...said, defects: own } : said);
}

function setDevice(site, before, set, clock) {
  const device = { ...before, fields: setsFields(before.fields, set), seen: clock };
  if ("kind" in set) device.kind = set.kind;
  if ("place" in set) device.place = set.place ?? undefined;
  if ("circuit" in set) Object.assign(device, { panel: undefined, circuit: undefined, supply: undefined }, site.circuits.get(set.circuit));
  site.devices.set(device.id, device);
}

/** A label names the place of a fixed device and the item itself of a portable one. */
function eachHolder(site, subject, change) {
  for (const [id, d] of site.devices) {
    if (id !== subject && d.place !== subject) continue;
    const copy = { ...d };
    change(copy);
    site.devices.set(id, copy);
  }
}

function tagAt(site, place, except) {
  if (!place) return undefined;
  for (const d of site.devices.values()) if (d.place === place && d.id !== except && d.tag) return d.tag;
  return undefined;
}

/** Circuits that devices of a list hang on, by id: {panel, circuit, supply}. */
export function circuitsOf(devices) {
  const circuits = new Map();
  for (const d of devices) if (d.fields?.circuit && !circuits.has(d.fields.circuit)) circuits.set(d.fields.circuit, { panel: d.panel, circuit: d.circuit, supply: d.supply });
  return circuits;
}

/** The copy's order; what was added or moved stands at the end of its room, a new room at the end. */
function walking(site) {
  const list = [];
  for (const d of site.devices.values()) if (!site.added.includes(d.id)) list.push(d);
  for (const id of site.added) {
    const device = site.devices.get(id);
    if (!device) continue;
    const room = roomOf(site.places.get(device.place));
    const at = device.place ? list.findLastIndex((d) => d.place && roomOf(site.places.get(d.place)) === room) : -1;
    if (at < 0) list.push(device);
    else list.splice(at + 1, 0, device);
  }
  return list;
}

/** One text for a room, to compare. */
export const roomOf = (place) => JSON.stringify([place?.building ?? "", place?.floor ?? "", place?.room ?? ""]);
