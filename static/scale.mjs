// The small scale under a number: where its limit band, today's mark and last time's mark lie. Gives figures on a
// drawing 360 wide; scale-view.mjs draws them. The same drawing stands on the entry page. Pure.

import { showNumber } from "./number.mjs";

export const WIDTH = 360;
const EDGE = 7; // room for a mark that lies at an end

/** The place of a value along the scale; values beyond an end are held at it. */
export function along(scale, value) {
  const { from, to, shape } = scale;
  const clamp = (f) => Math.min(1, Math.max(0, f));
  const f = shape === "log"
    ? clamp(Math.log(Math.max(value, from / 10) / from) / Math.log(to / from))
    : clamp((value - from) / (to - from));
  return EDGE + f * (WIDTH - 2 * EDGE);
}

/** Values to write under the scale: decades on a logarithmic one, else steps of 1, 2 or 5. */
export function ticks({ from, to, shape }) {
  const out = [];
  if (shape === "log") {
    for (let d = 10 ** Math.ceil(Math.log10(from) - 1e-9); d <= to * 1.0001; d *= 10) out.push(Number(d.toPrecision(6)));
    return out;
  }
  const raw = (to - from) / 4, power = 10 ** Math.floor(Math.log10(raw));
  const step = [1, 2, 5, 10].map((k) => k * power).find((s) => s >= raw - 1e-12);
  for (let v = Math.ceil(from / step) * step; v <= to + step * 1e-6; v += step) out.push(Number(v.toPrecision(6)));
  return out;
}

/**
 * drawing(scale, {bounds, value, beyond, last}) → {band:{x, width, left, right}, ticks, mark, lastMark}. bounds: {min, max} of the
 * limit that decides; beyond: "above"|"below" where the reading is a bound. band.left/right say which ends are limits.
 */
export function drawing(scale, { bounds, value, beyond, last } = {}) {
  const out = { ticks: ticks(scale).map((v) => ({ x: along(scale, v), text: showNumber(v) })), band: null, mark: null, lastMark: null };
  if (bounds && (bounds.min !== undefined || bounds.max !== undefined)) {
    const a = bounds.min === undefined ? EDGE : along(scale, bounds.min);
    const b = bounds.max === undefined ? WIDTH - EDGE : along(scale, bounds.max);
    out.band = { x: a, width: Math.max(0, b - a), left: bounds.min !== undefined, right: bounds.max !== undefined };
  }
  if (typeof value === "number") {
    out.mark = { x: along(scale, value), beyond: beyond ?? (value > scale.to ? "above" : value < scale.from ? "below" : null) };
  }
  if (typeof last === "number") out.lastMark = { x: along(scale, last) };
  return out;
}
