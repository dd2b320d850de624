// The judge on the phone: the same results and findings as forms/judge.go, held by testdata/verdicts.json. Pure: takes
// forms and limit sets as data, touches nothing.

import { conformity, currentInDoubt, doubt, sure } from "./doubt.mjs";
import { Facts, fits, given, limitsOn, matches, settle, settled } from "./facts.mjs";
import { apply, figure, gaugeProof, prove, rampMA, rampRate, round9 } from "./limit.mjs";
import { Refusal, codeOf, codes } from "./reading.mjs";

/** Names the rules; equal to forms.JudgeVersion. */
export const JudgeVersion = 2;

const rank = { fail: 4, "conditional-fail": 3, missing: 2, incomplete: 2, "conditional-pass": 1 };
const results = ["pass", "conditional-pass", "incomplete", "conditional-fail", "fail"];
const resultOf = (findings) => results[Math.max(0, ...findings.map((f) => rank[f.verdict] ?? 0))];

const sorted = (at) => Object.fromEntries(Object.keys(at).sort().map((k) => [k, at[k]]));

class Judging extends Facts {
  findings = [];
  seen = new Set();
  missed = new Set();
  ended = false;

  run() {
    for (const name of this.form.needs ?? []) if (this.field(name) === undefined) this.miss(name, undefined, "", "missing.of_device");
    for (const l of this.set.limits) {
      const value = l.field && this.all(l.when) ? this.field(l.field) : undefined;
      if (value !== undefined) this.limit(l, { reading: l.field, unit: l.unit }, { value });
    }
    for (const step of this.form.steps) for (const ask of step.asks) this.ask(ask, step);
    for (const c of codes) this.code(c);
    let result = resultOf(this.findings);
    if (result !== "fail" && this.nothingTested()) result = "not-tested";
    return { result, findings: this.findings };
  }

  ask(ask, step) {
    const c = codeOf.get(ask.reading);
    if (!c || !this.all(ask.when)) return;
    this.code(c);
    if (this.ended) return;
    if (!this.barred(step)) this.required(ask);
    if (ask.ends?.includes(this.answer(ask.reading))) this.ended = true;
  }

  required(ask) {
    let bySeries = false;
    for (const c of (ask.series && this.form.series?.conditions) || []) {
      if (c.any_of[0] !== ask.reading || !this.all(c.when)) continue;
      bySeries = true;
      if (!this.taken(c)) this.missUnder(c);
    }
    if (!(ask.required || (ask.expected && this.reading(ask.reading)?.missing)) || bySeries || given(this.reading(ask.reading))) return;
    if ((ask.or && this.givenAnywhere(ask.or)) || (ask.series && this.givenAnywhere(ask.reading))) return;
    if (ask.reading === "test_current_ma" && this.testCurrent(round9).current !== undefined) return;
    this.miss(ask.reading, undefined, this.reading(ask.reading)?.missing, "");
  }

  givenAnywhere(code) {
    return given(this.reading(code)) || this.entry.series.some((item) => given(item.readings[code]));
  }

  taken(c) {
    return c.any_of.some((code) => {
      const there = (item) => given(item.readings[code]) && fits(codeOf.get(code), item.readings[code]) && matches(item.at, c.at);
      const base = () => Object.entries(c.at).every(([k, v]) => this.entry.readings[k]?.value === v);
      return this.entry.series.some(there) || (given(this.reading(code)) && base());
    });
  }

  missUnder(c) {
    let reason = "";
    for (const code of c.any_of) {
      reason ||= this.entry.readings[code]?.missing ?? "";
      for (const item of this.entry.series) if (item.readings[code]?.missing && matches(item.at, c.at)) reason = item.readings[code].missing;
    }
    this.addMissing(c.any_of[0], c.at, reason, "");
  }

  miss(code, at, reason, text) {
    if (!at) {
      if (this.missed.has(code)) return;
      this.missed.add(code);
    }
    this.addMissing(code, at, reason, text);
  }

  addMissing(reading, at, reason, text) {
    const f = { reading };
    if (at) f.at = sorted(at);
    Object.assign(f, { verdict: "missing", level: "must" });
    if (reason) f.reason = reason;
    f.text = text || `missing.${reason || "none"}`;
    this.findings.push(f);
  }

  /** Judges a reading of the entry and, in their order, those taken under conditions; each code once. */
  code(c) {
    if (this.seen.has(c)) return;
    this.seen.add(c);
    const base = this.reading(c.reading);
    if (given(base)) this.limits(c, base);
    for (const item of this.entry.series) {
      this.item = item;
      const r = item.readings[c.reading];
      if (r && fits(c, r) && given(settled(r))) this.limits(c, settled(r));
    }
    this.item = undefined;
  }

  limits(c, r) {
    for (const l of limitsOn(this, c.reading)) this.limit(l, c, r);
  }

  limit(l, c, r) {
    const a = apply(this, l, r);
    const unit = a.unit || c.unit;
    const f = { reading: c.reading, value: shown(r, c.unit, unit) };
    if (a.unit) f.unit = a.unit;
    if (this.item?.at && Object.keys(this.item.at).length) f.at = sorted(this.item.at);
    if (a.lacks) this.miss(a.lacks, f.at, "", "");
    const d = a.text && !(a.lacks && r.no_trip) ? { verdict: "not-judged", text: a.text } : this.decide(l, c, r, a, unit);
    f.verdict = d.verdict;
    if (a.limit) f.limit = a.limit;
    for (const name of ["uncertainty", "probability"]) if (d[name] !== undefined) f[name] = d[name];
    if (a.scaled_ma !== undefined) f.scaled_ma = a.scaled_ma;
    f.level = l.level;
    if (d.severity) f.severity = d.severity;
    f.source = l.source;
    if (d.text) f.text = d.text;
    this.findings.push(f);
  }

  decide(l, c, r, a, unit) {
    const [outcome, text] = this.outcome(l, c, r, a, unit);
    const number = r.above ?? r.below ?? (typeof r.value === "number" ? figure(r, c.unit, unit) : undefined);
    const weighed = l.level === "must" && a.limit && number !== undefined ? this.weigh(c, r, a, number, unit) : {};
    return { ...this.verdictOf(l, r, a, outcome, text, weighed, number), ...weighed };
  }

  verdictOf(l, r, a, outcome, text, weighed, number) {
    const guarded = () => (a.limit && number !== undefined && this.guard(l, r, a, weighed, number, outcome)) || undefined;
    if (outcome === "inside") return guarded() ?? { verdict: "pass" };
    if (l.level === "watch") return { verdict: "watch", text };
    if (outcome === "unproven") return { verdict: "conditional-fail", text };
    if (outcome === "low" && (l.loads || a.low)) {
      if (this.answer("loads_disconnected") === "no") return { verdict: "watch", text: "limit.trips_low_with_loads" };
      return { ...(guarded() ?? { verdict: "fail", text: "limit.trips_low" }), severity: "nuisance" };
    }
    if (a.no_trip) return { verdict: "fail", severity: l.severity, text: "limit.must_not_trip" };
    if (a.limit && number !== undefined) {
      if (outcome === "high" && currentInDoubt(this.entry.given.accuracy, a) && (r.above !== undefined || this.set.rule === "guard-band")) return { verdict: "conditional-fail", text: "limit.current_in_doubt" };
      const open = guarded();
      if (open) return open;
      if (outcome === "high" && l.ramp && a.limit.max !== undefined && this.rampExplains(r, a.limit.max)) return { verdict: "conditional-fail", text: "limit.ramp_over_reads" };
    }
    return { verdict: "fail", severity: l.severity, text };
  }

  /** What a reading proves of a limit, and the text that goes with it. */
  outcome(l, c, r, a, unit) {
    let outcome = "other";
    if (a.no_trip) outcome = r.no_trip || r.above !== undefined ? "inside" : "low";
    else if (a.over_range) outcome = r.above !== undefined ? "high" : "inside";
    else if (a.lacks) outcome = "unproven"; // it did not trip, at nobody says what current
    else if (a.limit) outcome = prove(a.limit, r, c.unit, unit);
    const text = (typeof r.value === "string" && l.texts?.[r.value]) || l.text;
    if (l.gauge) {
      const { retention_gauge: gauge, gauge: earlier } = this.entry.given;
      const [weighed, why] = gaugeProof(l, gauge || earlier, outcome);
      return [weighed, why || text];
    }
    if (outcome !== "unproven") return [outcome, text];
    if (currentInDoubt(this.entry.given.accuracy, a)) return [outcome, "limit.current_in_doubt"];
    return [outcome, r.below !== undefined ? "limit.not_proven" : "limit.stopped_before"];
  }

  weigh(c, r, a, number, unit) {
    const uncertainty = doubt(this.entry.given.accuracy, c, a, number, unit);
    if (uncertainty === undefined) return {};
    if (r.value === undefined || uncertainty === 0) return { uncertainty };
    return { uncertainty, probability: conformity(number, a.limit, uncertainty / 2) };
  }

  /** What the instrument's doubt leaves open under a guard band; undefined where the outcome stands. */
  guard(l, r, a, { uncertainty }, number, outcome) {
    if (this.set.rule !== "guard-band" || l.level !== "must" || !["inside", "low", "high"].includes(outcome)) return undefined;
    if (uncertainty === undefined) return outcome === "inside" ? { verdict: "conditional-pass", text: "limit.accuracy_unknown" } : undefined;
    if (sure(a.limit, r, number, uncertainty, outcome)) return undefined;
    return outcome === "inside" ? { verdict: "conditional-pass", text: "limit.guard_inside" } : { verdict: "conditional-fail", text: "limit.guard_outside" };
  }

  rampExplains(r, limit) {
    const rate = rampRate(this.entry.given.ramp);
    if (rate <= 0) return false;
    const most = rampMA(limit, rate);
    return r.above !== undefined ? r.above < most : r.value <= most;
  }

  nothingTested() {
    let reason = false, dead = false, tested = false;
    for (const readings of [this.entry.readings, ...this.entry.series.map((s) => s.readings)]) {
      for (const [code, raw] of Object.entries(readings)) {
        const c = codeOf.get(code), r = settled(raw);
        if (!c) continue;
        reason ||= Boolean(r.missing);
        dead ||= r.missing === "circuit-dead";
        tested ||= c.test && given(r) && fits(c, r);
      }
    }
    if (dead && this.answer("found") === "no-power") return true;
    return reason && !tested && resultOf(this.findings) === "incomplete";
  }
}

function shown(r, own, unit) {
  if (r.no_trip) return "no-trip";
  if (r.above !== undefined) return { above: r.above };
  if (r.below !== undefined) return { below: r.below };
  return typeof r.value === "string" ? r.value : figure(r, own, unit);
}

/** Judges an entry {given, readings, series} of a form under a limit set: {result, findings}. Throws a Refusal only for a
 *  decision rule it does not know; readings it cannot understand count as not given. */
export function judge(form, set, entry) {
  if (set.rule && !["simple", "guard-band"].includes(set.rule)) throw new Refusal("limit_set", `The limit set "${set.limit_set}" decides by the rule "${set.rule}", which this version does not know. Use a newer version, or a set whose rule is simple or guard-band.`);
  return new Judging(form, set, settle(entry)).run();
}

/** Limits of a reading before it is typed, must before watch: [{limit, no_trip, unit, level, source, text, lacks}].
 *  at is undefined or the conditions of a series item. */
export function limitsFor(form, set, entry, reading, at) {
  const facts = new Facts(form, set, settle(entry));
  if (at) facts.item = facts.entry.series.findLast((item) => matches(item.at, at)) ?? { at, readings: {} };
  const r = facts.reading(reading);
  return [...limitsOn(facts, reading)].map((l) => ({ ...apply(facts, l, r), level: l.level, source: l.source }));
}
