// A short number that tells apart the people who share a phone. It is kept as a slow hash only, and says who works, not
// more: whoever holds the phone holds what is on it. Pure but for the browser's own cryptography.

const ROUNDS = 600_000; // PBKDF2-HMAC-SHA-256; OWASP's figure for passwords (Password Storage Cheat Sheet, 2023; from memory)
export const TRIES = 5; // wrong ones before the pause
export const PAUSE = 60_000; // ms

/** Six to twelve digits. */
export const isPin = (text) => /^\d{6,12}$/.test(text);

async function derive(pin, salt, rounds, subtle) {
  const key = await subtle.importKey("raw", new TextEncoder().encode(pin), "PBKDF2", false, ["deriveBits"]);
  return new Uint8Array(await subtle.deriveBits({ name: "PBKDF2", hash: "SHA-256", salt, iterations: rounds }, key, 256));
}

/** What is kept of a PIN: {salt, rounds, hash}. */
export async function sealPin(pin, { subtle = crypto.subtle, salt = crypto.getRandomValues(new Uint8Array(16)), rounds = ROUNDS } = {}) {
  return { salt, rounds, hash: await derive(pin, salt, rounds, subtle) };
}

export async function fitsPin(pin, sealed, { subtle = crypto.subtle } = {}) {
  const hash = await derive(pin, sealed.salt, sealed.rounds, subtle);
  return hash.reduce((differ, b, i) => differ | (b ^ sealed.hash[i]), hash.length ^ sealed.hash.length) === 0;
}

/** A person's row after a wrong PIN: after several the next try waits. */
export function afterWrong(row, now) {
  const wrong = (row.wrong ?? 0) + 1;
  return wrong >= TRIES ? { ...row, wrong: 0, until: now + PAUSE } : { ...row, wrong };
}
