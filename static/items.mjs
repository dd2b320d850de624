// Items that travel: a portable item belongs to its depot, and every record of it is written in the depot's log; where it
// is now is a field like any other (at_site, where). Pure.

const PORTABLE = new Set(["cord-set", "portable-gfci", "plug-in-equipment"]);
/** Kinds that travel: they have no place of their own. */
export const isPortable = (kind) => PORTABLE.has(kind);

/** Whether a device is an item that travels. */
export const travels = (device) => isPortable(device.kind) && !device.place;

/** The log of the site an item is at: its depot's where nobody said another. */
export const siteOf = (depot, device) => device.fields?.at_site ?? depot;

/** The record that says where an item is now; null where nothing differs. at: the log of the site. */
export function whereFacts({ depot, device, at, where }) {
  const typed = { at_site: at === depot ? null : at, where: where === undefined ? device.fields?.where ?? null : where.trim() || null };
  const set = {};
  for (const [name, value] of Object.entries(typed)) if ((device.fields?.[name] ?? null) !== value) set[name] = value;
  if (Object.keys(set).length === 0) return null;
  return [{ kind: "device.set", subject: device.id, body: device.seen ? { set, seen: device.seen } : { set } }];
}

/** Items of other depots that are at a site, as this phone's copies know them. sites: open sites. */
export function itemsHere(sites, log) {
  return sites.filter((s) => s.log !== log).flatMap((site) => site.once(`at ${log}`, () => site.devices.filter((d) => travels(d) && d.fields?.at_site === log)).map((device) => ({ site, device })));
}
