// What the instrument's doubt leaves open: decision rules and probability of conformity, the same figures as
// forms/doubt.go and forms/conformity.go. Pure.

import { round9 } from "./limit.mjs";
import { perUnit } from "./reading.mjs";

const curveSlope = 1.43; // 1 % of doubt about the current is 1.43 % of the limit

/** U (k = 2) of a value, in the reading's own unit. */
const expanded = (accuracy, value) => ((accuracy?.percent ?? 0) * value) / 100 + (accuracy?.plus ?? 0);

/** U of a figure against its limit, in the limit's unit; undefined where nobody says how accurate the instrument is. */
export function doubt(accuracies, c, a, figure, unit) {
  const own = accuracies?.[c.reading];
  if (!own) return undefined;
  const u = expanded({ percent: own.percent, plus: (own.plus ?? 0) / (perUnit(c.unit, unit) ?? 1) }, figure);
  if (!a.current) return round9(u);
  const ofCurrent = accuracies.test_current_ma;
  if (!ofCurrent) return undefined;
  const moved = (curveSlope * a.limit.max * expanded(ofCurrent, a.current)) / a.current;
  return round9(Math.sqrt(u * u + moved * moved));
}

/** Whether an outcome holds for every true value within the doubt. */
export function sure(b, r, figure, u, outcome) {
  const least = round9(figure - u), most = round9(figure + u);
  if (r.above !== undefined && outcome === "high") return least >= b.max;
  if (r.below !== undefined && outcome === "low") return most <= b.min;
  if (outcome === "high") return least > b.max;
  if (outcome === "low") return most < b.min;
  if (r.above !== undefined) return b.min === undefined || least >= b.min;
  if (r.below !== undefined) return b.max === undefined || most <= b.max;
  return (b.min === undefined || least >= b.min) && (b.max === undefined || most <= b.max);
}

/** Whether the test current may have been below what a Class A device must trip at. */
export function currentInDoubt(accuracies, a) {
  const accuracy = accuracies?.test_current_ma;
  return Boolean(a.current && accuracy) && round9(a.current - expanded(accuracy, a.current)) < 6;
}

/** Probability that the true value lies inside {min, max}; u is the standard uncertainty, above 0. Six decimals. */
export function conformity(value, { min, max }, u) {
  let p = 1;
  if (max !== undefined) p = normal((max - value) / u);
  if (min !== undefined) p -= normal((min - value) / u);
  return Math.floor(Math.max(p, 0) * 1e6 + 0.5) / 1e6;
}

/** The standard normal distribution function, by the operations of forms/conformity.go in their order. */
export function normal(z) {
  if (z > 8) return 1;
  if (z < -8) return 0;
  const q = z * z;
  let sum = z, term = z;
  for (let k = 3; ; k += 2) {
    term = (term * q) / k;
    const next = sum + term;
    if (next === sum) break;
    sum = next;
  }
  return 0.5 + 0.3989422804014327 * sum * decay(q / 2);
}

function decay(x) {
  const y = x / 64;
  let sum = 1, term = 1;
  for (let k = 1; k <= 20; k++) {
    term = (-term * y) / k;
    sum += term;
  }
  for (let i = 0; i < 6; i++) sum *= sum;
  return sum;
}
