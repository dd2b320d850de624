// The rest of a round as codes one phone shows and another reads: the site's code, the round where it was made in the office, and the
// devices still to be walked; no name, no result, nothing that opens anything. A long list takes several codes, shown one after
// another. Pure.

const PER_CODE = 50; // devices; such a code is still read from a screen at arm's length
const TAIL = 10; // hexadecimal digits of a device's id that stand for it: 40 random bits tell 5,000 devices apart
const HEAD = "TRIPWELL/ROUND"; // capitals, digits and / take five and a half bits each in a code

const tailOf = (id) => id.replaceAll("-", "").slice(-TAIL).toUpperCase();

/** The texts of the codes for these devices of a site; round: the id of one made in the office. */
export function codesOf(site, ids, round) {
  const count = Math.max(1, Math.ceil(ids.length / PER_CODE)), head = round ? `${HEAD}/2/${site.toUpperCase()}/${tailOf(round)}` : `${HEAD}/1/${site.toUpperCase()}`;
  return Array.from({ length: count }, (_, i) => `${head}/${i + 1}/${count}/${ids.slice(i * PER_CODE, (i + 1) * PER_CODE).map(tailOf).join("")}`);
}

/** What a code says: {site, round, n, of, tails}, round "" where it is a walk of the day; null where it is none of these. */
export function readCode(text) {
  const m = /^TRIPWELL\/ROUND\/(?:1\/([A-Z0-9-]{2,12})|2\/([A-Z0-9-]{2,12})\/([0-9A-F]{10}))\/(\d{1,3})\/(\d{1,3})\/([0-9A-F]*)$/.exec(text ?? "");
  if (!m) return null;
  const [, day, made, round = "", n, of, tails] = m;
  if (tails.length % TAIL !== 0 || tails.length > PER_CODE * TAIL || !(+n >= 1 && +n <= +of)) return null;
  return { site: day ?? made, round, n: +n, of: +of, tails: tails.match(/.{10}/g) ?? [] };
}

/** Adds a code to those read before: {site, round, of, parts: {n: tails}}. A code of another list begins anew. */
export function gather(before, code) {
  const same = before && before.site === code.site && before.round === code.round && before.of === code.of;
  return { site: code.site, round: code.round, of: code.of, parts: { ...(same ? before.parts : {}), [code.n]: code.tails } };
}

export const isWhole = (read) => Boolean(read) && Object.keys(read.parts).length === read.of;

/** The devices of a list that a whole reading names, in walking order: {ids, unknown: how many are not on this phone}. */
export function devicesOf(devices, read) {
  const wanted = new Set(Object.values(read.parts).flat());
  const ids = devices.filter((d) => wanted.has(tailOf(d.id))).map((d) => d.id);
  return { ids, unknown: Math.max(0, wanted.size - ids.length) };
}

/** The round made in the office that a reading is of; undefined where it is of none, or of one that is not on this phone. */
export const roundOf = (rounds, read) => (rounds ?? []).find((r) => tailOf(r.id) === read.round);
