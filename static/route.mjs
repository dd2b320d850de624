// Addresses within the field page: #/site/CODE, #/device/ID, #/test/ID/TASK, #/find, those of WORK, #tag=K7QM2P3 (what a label's address
// /t/TAG becomes). Pure.

/** Pages of work beside a test, with what they are about: a site's code, a device or an entry. */
const WORK = new Set(["add", "bind", "label", "move", "replace", "dark", "failed", "correct", "room", "round", "hand", "take", "bring", "flaw"]);

/** parseRoute(hash, path) → {page, …}; the path counts only when it is a label's address and the hash says nothing. */
export function parseRoute(hash, path = "") {
  let h = hash.replace(/^#/, "");
  try {
    h = decodeURIComponent(h);
  } catch {
    h = "";
  }
  const labelled = /^\/t\/([0-9a-z-]{6,12})\/?$/i.exec(path);
  if (h.startsWith("tag=")) return { page: "tag", tag: bareTag(h.slice(4)) };
  const [, page, a, b] = h.split("/");
  if (page === "site" && a) return { page, code: a };
  if (page === "device" && a) return { page, device: a };
  if (page === "test" && a && b) return { page, device: a, task: b };
  if (page === "tray" || page === "find" || page === "along" || page === "people") return { page };
  if (WORK.has(page) && a) return { page, a, b };
  if (!h && labelled) return { page: "tag", tag: bareTag(labelled[1]) };
  return { page: "sites" };
}

export const toSite = (code) => `#/site/${encodeURIComponent(code)}`;
/** The page of a round whose code was read off its sheet, whatever host the code names; null where it is none. */
export function roundRead(text) {
  const m = /\/field#\/round\/([A-Z0-9-]{2,12})\/([0-9a-f]{8}(?:-[0-9a-f]{4}){3}-[0-9a-f]{12})$/.exec(text ?? "");
  return m ? toRound(m[1], m[2]) : null;
}
/** The page of a round made in the office; without one, the site's. */
export const toRound = (code, round) => (round ? `#/round/${encodeURIComponent(code)}/${round}` : toSite(code));
export const toDevice = (id) => `#/device/${id}`;
export const toTest = (id, task) => `#/test/${id}/${task}`;

/** A tag as it is compared: hyphens and spaces dropped, capitals, I and L read as 1, O as 0 (Crockford). */
export function bareTag(text) {
  return text.toUpperCase().replace(/[^0-9A-Z]/g, "").replace(/[IL]/g, "1").replace(/O/g, "0");
}
