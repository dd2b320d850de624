// Makes the one string an entry is: id, stamp, count and body in the order every record has. The string is kept and sent
// as it is and never written again. Pure but for the randomness of ids.

import { clockText, nextClock, parseClock } from "./clock.mjs";
import { newId, timeText, writeRecord } from "./record-line.mjs";

/**
 * at: ms of this phone's clock, as it is; offset: ms the server's clock was last ahead of it, which only the stamp takes in.
 * clock: the last stamp of this phone as text, undefined at first. Gives {id, clock, record}.
 */
export function makeRecord({ kind, log, subject, at, offset, body, n, clock, installation, person }) {
  const id = newId(at);
  const stamp = clockText(nextClock(parseClock(clock) ?? 0n, at + offset));
  return { id, clock: stamp, record: writeRecord({ id, kind, log, subject, at: timeText(at), clock: stamp, by: person, from: installation, n, body }) };
}
