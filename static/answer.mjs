// An answer is what a draft keeps of one question while it is being filled in; a reading is what the record carries.
// Answers: {pick:"yes"} | {typed, unit} | {typed, unit, gave_up:true} | {missing:"no-access"}. Pure.

import { parseNumber } from "./number.mjs";

/** The unit a reading's value is always in, by the ending of its code. */
export function unitOf(ask) {
  if (ask.unit) return ask.unit;
  if (ask.reading === "multiple") return "x";
  const ending = ask.reading.slice(ask.reading.lastIndexOf("_") + 1);
  return { ma: "mA", ms: "ms", ohm: "ohm", mohm: "Mohm", v: "V", pct: "%", g: "g", a: "A", deg: "deg" }[ending] ?? "";
}

/** Reads an answer: {reading} for the record, {error} when it cannot be read, {} when nothing is said yet. */
export function readAnswer(ask, answer) {
  if (!answer) return {};
  if (answer.missing) return { reading: { missing: answer.missing } };
  if (ask.type !== "number") return answer.pick ? { reading: { value: answer.pick } } : {};
  const own = unitOf(ask);
  const parsed = parseNumber(answer.typed ?? "", own, ask.units ?? [own], answer.unit ?? own);
  if (answer.gave_up) {
    // Only a device can be said not to have tripped without a figure; an ohmmeter over its range proves what its range is.
    if (parsed === null) return ask.reading.startsWith("trip_") ? { reading: { no_trip: true } } : {};
    if (parsed.error) return { error: parsed.error };
    return { reading: { typed: parsed.typed, unit: parsed.unit, above: parsed.value ?? parsed.above ?? parsed.below } };
  }
  if (parsed === null) return {};
  return parsed.error ? { error: parsed.error } : { reading: parsed };
}
