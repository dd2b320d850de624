// A site as the pages read it: its copy with what this phone recorded laid over. The copy itself is never changed. What
// pages ask again and again is worked out once; an entry just made is laid over one device, not over five thousand. Pure.

import { overlay, withOwn } from "./list.mjs";
import { factsOf, withFacts } from "./own-facts.mjs";

/** Where things stand in a copy, by id; a copy never changes, so this is made once for each. */
const indexes = new WeakMap();
function indexOf(snapshot) {
  if (!indexes.has(snapshot)) indexes.set(snapshot, { places: new Map(snapshot.places.map((p) => [p.id, p])), at: placesIn(snapshot.devices) });
  return indexes.get(snapshot);
}
const placesIn = (devices) => new Map(devices.map((d, i) => [d.id, i]));

/**
 * openSite(row, records, today) → {log, taken, snapshot, today, devices, places, device(id), once(key, make), lay(device,
 * records)}. row: of the copies; records: rows of the tray, of every site. once keeps what make() gives until something is laid over.
 */
export function openSite(row, records, today) {
  const { snapshot, log, taken } = row;
  const mine = records.filter((r) => r.log === log), facts = factsOf(mine), copy = indexOf(snapshot);
  const { places, devices: read } = withFacts(snapshot, facts, copy.places);
  const devices = read.slice(), at = facts.length === 0 ? copy.at : placesIn(read);
  for (const [id, own] of overlay(mine)) if (at.has(id)) devices[at.get(id)] = withOwn(read[at.get(id)], own);
  let known = new Map();
  return {
    log, taken, snapshot, today, devices, places, device: (id) => devices[at.get(id)],
    once(key, make) {
      if (!known.has(key)) known.set(key, make());
      return known.get(key);
    },
    lay(id, all) {
      if (at.has(id)) devices[at.get(id)] = withOwn(read[at.get(id)], overlay(all.filter((r) => r.log === log && r.summary?.device === id)).get(id));
      known = new Map();
    },
  };
}

/** The open sites of a phone: opened again only when their copy, what is laid over it or the day has changed. */
export function openSites() {
  const open = new Map();
  const sign = (records, log) => records.reduce((all, r) => (r.log === log ? `${all}${r.id}${r.state[0]}` : all), "");
  return {
    /** Looked at again at the next reading. */
    stale() { for (const o of open.values()) o.checked = false; },
    get(log, row, records, todayOf) {
      const o = open.get(log);
      if (!row) { open.delete(log); return null; }
      if (o?.checked && o.snapshot === row.snapshot) return o.site;
      const today = todayOf(row.snapshot.site.zone), signed = sign(records, log);
      if (o && o.snapshot === row.snapshot && o.site.today === today && o.signed === signed) {
        o.checked = true;
        o.site.taken = row.taken;
        return o.site;
      }
      const site = openSite(row, records, today);
      open.set(log, { site, snapshot: row.snapshot, signed, checked: true });
      return site;
    },
    /** An entry was made at a device: laid over it alone. */
    lay(log, device, records) {
      const o = open.get(log);
      if (!o) return;
      o.site.lay(device, records);
      o.signed = sign(records, log);
    },
  };
}
