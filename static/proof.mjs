// RFC 6962 trees on the phone: whether a log goes on from what was seen of it, and whether a record stands at its place. The
// same cases as store/proof (testdata/proofs.json). Hashes travel in base64. Pure but for the browser's SHA-256.

const utf8 = new TextEncoder();
const sha256 = async (bytes) => new Uint8Array(await crypto.subtle.digest("SHA-256", bytes));

const bytesOf = (base64) => Uint8Array.from(atob(base64), (c) => c.charCodeAt(0));
const textOf = (bytes) => btoa(String.fromCharCode(...bytes));

function joined(...parts) {
  const out = new Uint8Array(parts.reduce((n, p) => n + p.length, 0));
  let at = 0;
  for (const p of parts) { out.set(p, at); at += p.length; }
  return out;
}

/** Hash of a leaf: SHA-256 over 0x00 and its data (RFC 6962, 2.1). */
export const leafHash = async (data) => textOf(await sha256(joined([0], data)));
const nodeHash = async (left, right) => textOf(await sha256(joined([1], bytesOf(left), bytesOf(right))));

/** A record's leaf data: its stamp, a line feed, its bytes. */
export const leafData = (stamp, record) => utf8.encode(`${stamp}\n${record}`);

const odd = (n) => n % 2 === 1, half = (n) => Math.floor(n / 2); // sizes may pass 2^31

/** Whether leaf n (from 0) of a tree has this hash, by its audit path (RFC 9162, 2.1.3.2). */
export async function includes(path, size, root, n, leaf) {
  if (!(n >= 0 && n < size)) return false;
  let at = n, last = size - 1, r = leaf;
  for (const p of path) {
    if (last === 0) return false;
    if (odd(at) || at === last) {
      r = await nodeHash(p, r);
      while (!odd(at) && at !== 0) { at = half(at); last = half(last); }
    } else {
      r = await nodeHash(r, p);
    }
    at = half(at);
    last = half(last);
  }
  return last === 0 && r === root;
}

/** Whether a tree of a size goes on from what it was at an earlier size (RFC 9162, 2.1.4.2). */
export async function continues(path, size, root, from, fromRoot) {
  if (!(from >= 1 && from <= size)) return false;
  if (from === size) return path.length === 0 && root === fromRoot;
  let at = from - 1, last = size - 1;
  while (odd(at)) { at = half(at); last = half(last); }
  const steps = at === 0 ? [fromRoot, ...path] : path; // what was a whole tree is not sent: it is known
  if (steps.length === 0) return false;
  let old = steps[0], now = steps[0];
  for (const p of steps.slice(1)) {
    if (last === 0) return false;
    if (odd(at) || at === last) {
      old = await nodeHash(p, old);
      now = await nodeHash(p, now);
      while (!odd(at) && at !== 0) { at = half(at); last = half(last); }
    } else {
      now = await nodeHash(now, p);
    }
    at = half(at);
    last = half(last);
  }
  return last === 0 && old === fromRoot && now === root;
}
