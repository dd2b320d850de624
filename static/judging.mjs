// What the form page asks of the judge: the verdict of a draft, and what the limits say of one question, also before
// anything is typed. Pure.

import { judge, limitsFor } from "./judge.mjs";
import { convert } from "./number.mjs";
import { conditionKey } from "./draft.mjs";
import { unitOf } from "./answer.mjs";

/** How telling a finding is; of equals the one that comes first (must before watch) stays first. */
const TELLING = ["fail", "conditional-fail", "conditional-pass", "watch", "pass", "not-judged", "missing"];

/** Default limit set of a kind, as forms.DefaultLimitSet. */
export function defaultLimitSet(kind, delayed) {
  if (["gfci-receptacle", "gfci-breaker", "portable-gfci"].includes(kind)) return "us-class-a";
  if (["receptacle", "protected-receptacle"].includes(kind)) return "us-receptacle";
  if (kind === "hospital-receptacle") return "us-health-care";
  if (["cord-set", "plug-in-equipment"].includes(kind)) return "us-cord-set";
  if (["rcd", "rcbo"].includes(kind)) return delayed ? "iec-delayed" : "iec-general";
  return "";
}

/** The limit set that judges a device: the register's, else the one that stands for its kind here, else the shipped one of its kind, else the form's. */
export function limitSetFor(device, form, sets) {
  const known = (id) => sets.find((s) => s.limit_set === id);
  return known(device.fields?.limit_set) ?? known(device.limit_set) ?? known(defaultLimitSet(device.kind, device.fields?.delayed === true)) ?? known(form.limit_set) ?? null;
}

const entryOf = (judged, walked) => ({ given: judged.given, readings: walked.readings, series: walked.series });

/** The verdict of what a walked form has so far. judged: {form, limitSet, given}. */
export function judgeWalked(judged, walked) {
  if (!judged.limitSet) return { result: "incomplete", findings: [] };
  return judge(judged.form, judged.limitSet, entryOf(judged, walked));
}

/**
 * What there is to say of one question, under the conditions of a series row where at is given: {findings, bounds, hint}.
 * bounds: {min, max, level, no_trip, said} of the limit to draw, in the reading's own unit, said as the document says it
 * in the unit typed; hint: words key of why there is none.
 */
export function about(judged, walked, verdict, ask, at) {
  const key = at && conditionKey(at);
  const findings = verdict.findings.filter((f) => f.reading === ask.reading && (at ? f.at && conditionKey(f.at) === key : !f.at))
    .toSorted((a, b) => TELLING.indexOf(a.verdict) - TELLING.indexOf(b.verdict));
  if (ask.type !== "number" || !judged.limitSet) return { findings };
  const limits = limitsFor(judged.form, judged.limitSet, entryOf(judged, walked), ask.reading, at);
  const figures = limits.filter((l) => l.no_trip || l.limit?.min !== undefined || l.limit?.max !== undefined);
  const drawn = figures.find((l) => l.level === "must") ?? figures[0];
  return { findings, bounds: drawn && boundsOf(ask, drawn), hint: drawn ? undefined : limits.find((l) => l.text)?.text };
}

function boundsOf(ask, { limit, level, unit, no_trip }) {
  const own = unitOf(ask), out = { level };
  if (no_trip) out.no_trip = true;
  for (const end of ["min", "max"]) if (limit?.[end] !== undefined) out[end] = convert(limit[end], unit ?? own, own);
  if (unit && unit !== own) out.said = { ...limit, unit };
  return out;
}
