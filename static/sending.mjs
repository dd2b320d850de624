// When to send: after a save, when the line or the page comes back, and on a timer that waits longer after each failure.
// Never stops for good and never runs twice at once. Timers and randomness are passed in. Pure.

import { pause } from "./tray.mjs";

/** With nothing to send, how often to look for news. */
const IDLE = 5 * 60_000;

/**
 * sending({run, later, cancel, random}) → {kick(), stop()}. run() does one drain and gives {state, retryAfter};
 * later(fn, ms) and cancel(id) are timers.
 */
export function sending({ run, later, cancel, random }) {
  let timer = null, running = false, again = false, tries = 0, stopped = false;
  async function go() {
    if (stopped) return;
    if (running) { again = true; return; }
    running = true;
    if (timer !== null) cancel(timer);
    timer = null;
    let done;
    try {
      done = await run();
    } catch {
      done = { state: "trouble" };
    }
    running = false;
    tries = done.state === "empty" ? 0 : tries + 1;
    if (again) { again = false; go(); return; }
    if (!stopped) timer = later(go, tries === 0 ? IDLE : pause(tries, random, done.retryAfter));
  }
  return {
    /** Something changed (a save, the line is back, the page is looked at): try now and forget earlier failures. */
    kick() { tries = 0; return go(); },
    stop() { stopped = true; if (timer !== null) cancel(timer); },
  };
}
