// Trip once, walk round, note what went dark: what that says of the map and of each outlet. Pure.

import { lockedEntry } from "./room-locked.mjs";
import { feedFacts, fedBy } from "./register-work.mjs";

/** What an outlet was found to be: dark, or live though the map says it is fed from here. */
export const SAID = ["dark", "live"];

/** Rows to walk to: what the map says, then what was found beside it. said: Map device id → dark | live. */
export function sweepRows(devices, protector, said) {
  const mapped = fedBy(devices, protector.id), known = new Set(mapped.map((d) => d.id));
  return [...mapped.map((device) => ({ device, mapped: true, said: said.get(device.id) })),
    ...devices.filter((d) => said.has(d.id) && !known.has(d.id)).map((device) => ({ device, mapped: false, said: said.get(device.id) }))];
}

/** Outlets that protection was lost at: the map has them here, and they stayed live. */
export const lost = (rows) => rows.filter((r) => r.mapped && r.said === "live");

/**
 * The map's changes and the flags: an outlet that went dark hangs on this protector from now on; a mapped one that stayed
 * live is a defect by hand and stays on the map until somebody says otherwise.
 */
export function sweepFacts({ rows, protector, words, newId }) {
  const facts = rows.filter((r) => r.said === "dark" && r.device.fields?.fed_by !== protector.id).flatMap((r) => feedFacts(r.device, protector));
  for (const { device } of lost(rows)) facts.push({ kind: "defect.opened", subject: newId(), body: { device: device.id, cause: "protection-lost", protector: protector.id, text: words(device) } });
  return facts;
}

/** The form an outlet that went dark is written on: one that asks whether it goes dark, else the outlet's own. */
export function darkForm(forms, device) {
  const own = forms.filter((f) => f.kinds.includes(device.kind));
  return own.find((f) => asks(f, "goes_dark")) ?? own.find((f) => f.task === "receptacle" && asks(f, "found")) ?? own.find((f) => asks(f, "found")) ?? null;
}

const asks = (form, code) => form.steps.some((s) => s.asks.some((a) => a.reading === code));

/** The entry of an outlet found dark after TEST: without power as intended, the rest not measured for that reason. */
export function darkEntry({ device, form, limitSet }) {
  const answers = asks(form, "goes_dark") ? { goes_dark: { pick: "yes" } } : { found: { pick: "no-power" } };
  return lockedEntry({ device, form, limitSet, reason: "circuit-dead", answers });
}

/** Critical loads that TEST at a protector takes the power from, its own place's first. */
export function criticalLoads(devices, places, protector) {
  const loads = [places.get(protector.place), ...fedBy(devices, protector.id).map((d) => places.get(d.place))].map((p) => p?.critical_load).filter((l) => typeof l === "string" && l !== "");
  return [...new Set(loads)];
}
