// The hybrid clock: stamps that order what was written on different devices. 64 bits, so always BigInt here and 16
// hexadecimal digits in records. A stamp is never shown as a time. Says the same as store/record/clock.go.

export const maxClock = (1n << 63n) - 1n;

/** The stamp of a new record. last: the largest stamp seen or made (0n at first). corrected: ms of this device's clock plus the last measured offset. */
export function nextClock(last, corrected) {
  const ms = Math.floor(corrected);
  const now = ms > 0 ? BigInt(ms) << 16n : 0n;
  const next = now > last ? now : last + 1n;
  return next < maxClock ? next : maxClock;
}

/** The larger of two stamps: every stamp that is seen is merged, whatever time it claims. */
export const mergeClock = (a, b) => (a > b ? a : b);

/** 16 lower-case hexadecimal digits. */
export const clockText = (clock) => clock.toString(16).padStart(16, "0");

/** The stamp of a text, null where it is none. */
export function parseClock(text) {
  if (typeof text !== "string" || !/^[0-9a-f]{16}$/.test(text)) return null;
  const clock = BigInt("0x" + text);
  return clock > 0n && clock <= maxClock ? clock : null;
}
