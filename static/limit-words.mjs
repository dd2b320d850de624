// A limit and what lies outside it, in words. Pure.

import { showNumber } from "./number.mjs";

const NNBSP = "\u202f";

/** How a unit is written. */
export const unitWord = (say, unit) => (unit && say.has(`unit.${unit}`) ? say(`unit.${unit}`) : unit ?? "");

export const withUnit = (say, value, unit) => `${showNumber(value)}${NNBSP}${unitWord(say, unit)}`;

/** "at most 4 677 ms", "4 to 6 mA", "at least 115 g, recommendation". */
export function limitWords(say, bounds, unit, level) {
  const { min, max } = bounds.said ?? bounds;
  unit = bounds.said?.unit ?? unit;
  if (bounds.no_trip) return say("verdict.must_hold");
  let text = "";
  if (min !== undefined && max !== undefined) text = say("verdict.between", { from: showNumber(min), to: withUnit(say, max, unit) });
  else if (max !== undefined) text = say("verdict.at_most", { n: withUnit(say, max, unit) });
  else if (min !== undefined) text = say("verdict.at_least", { n: withUnit(say, min, unit) });
  return text && level === "watch" ? `${text}, ${say("verdict.recommendation")}` : text;
}

/** "Inside the limit", "Outside: 0.4 mA too high", "Outside what is recommended", … for a number's finding. */
export function outsideWords(say, finding, own, reading) {
  const { verdict, limit, unit = own } = finding;
  if (verdict === "fail") {
    const by = excess(limit, typeof finding.value === "number" ? finding.value : reading.value);
    if (by === null) return say("field.outside");
    const way = by < 0 ? "low" : unit === "ms" ? "slow" : "high";
    return say(`field.outside_by.${way}`, { by: `${showNumber(Math.abs(by), 3)}${NNBSP}${unitWord(say, unit)}` });
  }
  return say.has(`field.number_verdict.${verdict}`) ? say(`field.number_verdict.${verdict}`) : say(`verdict.${verdict}`);
}

/** How far a value lies outside: negative below min, null when that is no number. */
function excess(limit, value) {
  if (typeof value !== "number" || !limit) return null;
  if (limit.max !== undefined && value > limit.max) return value - limit.max;
  if (limit.min !== undefined && value < limit.min) return value - limit.min;
  return null;
}
