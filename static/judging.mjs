// What the form page asks of the judge: the verdict of a draft, and what the limits say of one question, also before
// anything is typed. Pure.

import { judge } from "./judge.mjs";
import { convert } from "./number.mjs";
import { conditionKey } from "./draft.mjs";
import { unitOf } from "./answer.mjs";

/** How telling a finding is; of equals the one that comes first (must before watch) stays first. */
const TELLING = ["fail", "conditional-fail", "conditional-pass", "watch", "pass", "not-judged", "missing"];

/** The limit set that judges a device: the register's, else the form's, else the first made for its kind. */
export function limitSetFor(device, form, sets) {
  const wanted = device.fields?.limit_set || (device.fields?.delayed && form.limit_set === "iec-general" ? "iec-delayed" : form.limit_set);
  return sets.find((s) => s.limit_set === wanted) ?? sets.find((s) => s.kinds.includes(device.kind)) ?? null;
}

const run = ({ form, limitSet, given }, readings, series) => judge(form, limitSet, { given, readings, series });

/** The verdict of what a walked form has so far. judged: {form, limitSet, given}. */
export const judgeWalked = (judged, walked) => run(judged, walked.readings, walked.series);

const sorted = (findings) => findings.toSorted((a, b) => TELLING.indexOf(a.verdict) - TELLING.indexOf(b.verdict));

/** {findings, bounds} of one question. */
export function about(judged, walked, verdict, ask) {
  const mine = (v) => v.findings.filter((f) => f.reading === ask.reading && !f.at);
  const probe = () => run(judged, { ...walked.readings, [ask.reading]: probing(ask) }, walked.series);
  return { findings: sorted(mine(verdict)), bounds: ask.type === "number" ? boundsOf(ask, mine(verdict)) ?? boundsOf(ask, mine(probe())) : undefined };
}

/** The same for a question under stated conditions. */
export function aboutAt(judged, walked, verdict, ask, at) {
  const key = conditionKey(at);
  const mine = (v) => v.findings.filter((f) => f.reading === ask.reading && f.at && conditionKey(f.at) === key);
  const probe = () => run(judged, walked.readings, [...walked.series.filter((row) => conditionKey(row.at) !== key), { at, [ask.reading]: probing(ask) }]);
  return { findings: sorted(mine(verdict)), bounds: ask.type === "number" ? boundsOf(ask, mine(verdict)) ?? boundsOf(ask, mine(probe())) : undefined };
}

/** A value to ask the limit with while nothing is typed; which value does not matter to a limit's figures. */
const probing = (ask) => ({ value: ask.scale?.from ?? 1 });

/** The figures to draw: of the must limit where there is one, in the reading's own unit. */
function boundsOf(ask, findings) {
  const own = unitOf(ask);
  const figures = findings.filter((f) => f.limit && (f.limit.min !== undefined || f.limit.max !== undefined));
  const f = figures.find((x) => x.level === "must") ?? figures[0];
  if (!f) return undefined;
  const out = { level: f.level };
  for (const end of ["min", "max"]) if (f.limit[end] !== undefined) out[end] = convert(f.limit[end], f.unit ?? own, own);
  return out;
}
