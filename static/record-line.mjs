// Writes the one line a record is. Says the same as store/record. Pure but for the randomness of ids.

/** A version 7 id (RFC 9562) of a time in ms. */
export function newId(ms, random = crypto.getRandomValues(new Uint8Array(10))) {
  const hex = [Math.floor(ms).toString(16).padStart(12, "0").slice(-12)];
  const bytes = Uint8Array.from(random);
  bytes[0] = (bytes[0] & 0x0f) | 0x70;
  bytes[2] = (bytes[2] & 0x3f) | 0x80;
  for (const b of bytes) hex.push(b.toString(16).padStart(2, "0"));
  return hex.join("").replace(/^(.{8})(.{4})(.{4})(.{4})(.{12})$/, "$1-$2-$3-$4-$5");
}

/** A time as records write it, in the offset of this device (minutes east of UTC). */
export function timeText(ms, offsetMinutes = -new Date(ms).getTimezoneOffset()) {
  const local = new Date(ms + offsetMinutes * 60000).toISOString().slice(0, -1);
  if (offsetMinutes === 0) return local + "Z";
  const o = Math.abs(offsetMinutes), two = (n) => String(n).padStart(2, "0");
  return `${local}${offsetMinutes < 0 ? "-" : "+"}${two(Math.floor(o / 60))}:${two(o % 60)}`;
}

/**
 * The bytes of a record as a string, in the order every record has. The string is kept and sent as it is and never
 * written again. clock: 16 hexadecimal digits; at: text of timeText; body: an object.
 */
export function writeRecord({ id, kind, log, subject, at, clock, by, from, n, body }) {
  return JSON.stringify({ id, kind, v: 1, log, subject, at, clock, by, from, n, body });
}
