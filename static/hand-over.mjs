// The rest of a round as codes one phone shows and another reads: the site's code and the devices still to be walked, no
// name, no result, nothing that opens anything. A long list takes several codes, shown one after another. Pure.

const PER_CODE = 50; // devices; such a code is still read from a screen at arm's length
const TAIL = 10; // hexadecimal digits of a device's id that stand for it: 40 random bits tell 5,000 devices apart
const HEAD = "TRIPWELL/ROUND/1"; // capitals, digits and / take five and a half bits each in a code

const tailOf = (id) => id.replaceAll("-", "").slice(-TAIL).toUpperCase();

/** The texts of the codes for these devices of a site. */
export function codesOf(site, ids) {
  const count = Math.max(1, Math.ceil(ids.length / PER_CODE));
  return Array.from({ length: count }, (_, i) => `${HEAD}/${site.toUpperCase()}/${i + 1}/${count}/${ids.slice(i * PER_CODE, (i + 1) * PER_CODE).map(tailOf).join("")}`);
}

/** What a code says: {site, n, of, tails}; null where it is none of these. */
export function readCode(text) {
  const m = /^TRIPWELL\/ROUND\/1\/([A-Z0-9-]{2,12})\/(\d{1,3})\/(\d{1,3})\/([0-9A-F]*)$/.exec(text ?? "");
  if (!m || m[4].length % TAIL !== 0 || m[4].length > PER_CODE * TAIL || !(+m[2] >= 1 && +m[2] <= +m[3])) return null;
  return { site: m[1], n: +m[2], of: +m[3], tails: m[4].match(/.{10}/g) ?? [] };
}

/** Adds a code to those read before: {site, of, parts: {n: tails}}. A code of another list begins anew. */
export function gather(before, code) {
  const same = before && before.site === code.site && before.of === code.of;
  return { site: code.site, of: code.of, parts: { ...(same ? before.parts : {}), [code.n]: code.tails } };
}

export const isWhole = (read) => Boolean(read) && Object.keys(read.parts).length === read.of;

/** The devices of a list that a whole reading names, in walking order: {ids, unknown: how many are not on this phone}. */
export function devicesOf(devices, read) {
  const wanted = new Set(Object.values(read.parts).flat());
  const ids = devices.filter((d) => wanted.has(tailOf(d.id))).map((d) => d.id);
  return { ids, unknown: Math.max(0, wanted.size - ids.length) };
}
