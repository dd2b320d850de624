// What is known of one entry, as conditions and limits ask for it: the same answers as forms/facts.go. Pure.

import { Refusal, codeOf, readItem, readReading } from "./reading.mjs";

/** Whether a reading has a value or a bound. */
export const given = (r) => r !== undefined && !r.missing;

/** "not-testable" as an answer is a missing reading with that reason. */
export const settled = (r) => (r.value === "not-testable" ? { missing: "not-testable" } : r);

/** Whether a reading says something its code can say; one that does not counts as not given. */
export function fits(c, r) {
  if (typeof r.value === "number") return c.type === "number";
  if (typeof r.value === "string") return c.type !== "number" && r.value !== "";
  return Boolean(r.missing) || c.type === "number";
}

const attempt = (fn) => { try { return fn(); } catch (e) { if (e instanceof Refusal) return undefined; throw e; } };

/** Entry as written → entry as judged; what cannot be read is left out. */
export function settle(entry) {
  const readings = Object.create(null), series = [];
  for (const [code, raw] of Object.entries(entry.readings ?? {})) {
    const r = attempt(() => readReading(raw));
    if (r) readings[code] = r;
  }
  for (const raw of entry.series ?? []) {
    const item = attempt(() => readItem(raw));
    if (item) series.push(item);
  }
  return { given: entry.given ?? {}, readings, series };
}

/** Answers what conditions and limits ask of one entry, seen under one item of its series. */
export class Facts {
  constructor(form, set, entry) {
    Object.assign(this, { form, set, entry, item: undefined });
  }

  reading(code) {
    const c = codeOf.get(code);
    if (!c) return undefined;
    const own = this.item?.readings[code];
    if (own && fits(c, own)) return settled(own);
    const at = this.item?.at?.[code];
    if (at !== undefined && fits(c, { value: at })) return { value: at };
    const r = this.entry.readings[code];
    return r && fits(c, r) ? settled(r) : undefined;
  }

  /** Value of a reading for a condition; "" for a bound, undefined where missing. */
  answer(code) {
    const r = this.reading(code);
    if (given(r)) return r.value ?? "";
    if (code === "waveform") return "ac";
    if (code === "loads_disconnected") return { connected: "no", disconnected: "yes" }[this.entry.given.loads];
    return undefined;
  }

  number(code) {
    const v = this.answer(code);
    return typeof v === "number" ? v : undefined;
  }

  /** Test current in mA as {current, scaled}. That of a tester with a fixed resistor is scaled to the measured line voltage. */
  testCurrent(round9) {
    const current = this.number("test_current_ma"), volts = this.number("voltage_v");
    const { test_resistor_ohm: resistor, test_nominal_v: nominal } = this.entry.given;
    if (volts !== undefined && resistor > 0) return { current: round9((1000 * volts) / resistor), scaled: true };
    if (volts !== undefined && current !== undefined && nominal > 0) return { current: round9((current * volts) / nominal), scaled: true };
    return { current, scaled: false };
  }

  field(name) {
    const g = this.entry.given;
    const plain = (v) => (typeof v === "boolean" ? (v ? "yes" : "no") : typeof v === "number" || typeof v === "string" ? v : undefined);
    let v;
    if (name === "kind") v = g.kind || this.form?.kinds?.[0];
    else if (name === "delayed") v = g.delayed ? "yes" : undefined;
    else if (["rated_residual_ma", "equipment_ground", "supply", "gauge", "waveform", "rating_a", "nominal_v", "faces", "test_resistor_ohm"].includes(name)) v = g[name] || undefined;
    return v ?? plain(g.fields?.[name]) ?? plain(this.set?.assume?.[name]);
  }

  holds(c) {
    const v = c.field ? this.field(c.field) : this.answer(c.reading);
    const has = (list) => v !== undefined && [].concat(list).includes(v);
    if ((c.missing && v !== undefined) || ("is" in c && !has(c.is)) || ("not" in c && has(c.not))) return false;
    if (c.at_least === undefined && c.at_most === undefined && c.above === undefined && c.below === undefined) return true;
    return typeof v === "number" && !(v < c.at_least) && !(v > c.at_most) && !(v <= c.above) && !(v >= c.below);
  }

  all(conditions) {
    return (conditions ?? []).every((c) => this.holds(c));
  }

  /** What is known forbids the step: closed by a fact, not only for want of an answer. */
  barred(step) {
    const refuted = (c) => given(this.reading(c.reading)) && !this.holds(c);
    return (step.closed_when ?? []).some((c) => this.holds(c)) || (step.closed_unless ?? []).some(refuted);
  }

  closed(step) {
    return (step.closed_when ?? []).some((c) => this.holds(c)) || !this.all(step.closed_unless);
  }

  /** Whether a question is put under what is answered so far. */
  asked(ask) {
    return this.all(ask.when);
  }
}

/** Whether something was taken at all conditions wanted. */
export const matches = (at, want) => Object.entries(want).every(([code, v]) => at?.[code] === v);

/** The limits on a reading that hold under these facts, must before watch. */
export function* limitsOn(facts, reading) {
  for (const level of ["must", "watch"]) for (const l of facts.set.limits) if (l.reading === reading && l.level === level && facts.all(l.when)) yield l;
}
