// Trip once, walk round, note what went dark: what that says of the map and of each outlet. Pure.

import { lockedEntry } from "./room-locked.mjs";
import { ahead, behind, hangOn } from "./protection-map.mjs";
import { feedFacts } from "./register-work.mjs";

/** What an outlet was found to be: dark, or live though the map says it is fed from here. */

/** Rows to walk to: what the map says, then what was found beside it. said: Map device id → dark | live. */
export function sweepRows(devices, protector, said) {
  const mapped = hangOn(devices, protector), known = new Set(mapped.map((d) => d.id));
  return [...mapped.map((device) => ({ device, mapped: true, said: said.get(device.id) })),
    ...devices.filter((d) => said.has(d.id) && !known.has(d.id)).map((device) => ({ device, mapped: false, said: said.get(device.id) }))];
}

/** Outlets that protection was lost at: the map has them here, and they stayed live. */
export const lost = (rows) => rows.filter((r) => r.mapped && r.said === "live");

/**
 * The map's changes and the flags: an outlet that went dark hangs on this protector from now on, unless the map has the
 * protector ahead of it already, with a nearer one between; a mapped one that stayed
 * live is a defect by hand, unless its own entry says so already (fails), and stays on the map until somebody says otherwise.
 */
export function sweepFacts({ rows, protector, words, newId, devices = [], fails = () => false }) {
  const facts = rows.filter((r) => r.said === "dark" && !ahead(devices, r.device).some((d) => d.id === protector.id) && r.device.fields?.fed_by !== protector.id).flatMap((r) => feedFacts(r.device, protector));
  for (const { device } of lost(rows)) if (!fails(device)) facts.push({ kind: "defect.opened", subject: newId(), body: { device: device.id, cause: "protection-lost", protector: protector.id, text: words(device) } });
  return facts;
}

/** The form an outlet is written on: one that asks whether it is dead while tripped, else its own that asks how it was found. */
export function darkForm(forms, device) {
  const own = forms.filter((f) => f.kinds.includes(device.kind));
  return own.find((f) => asksDead(f, device)) ?? own.find((f) => f.task === "receptacle" && asks(f, "found")) ?? own.find((f) => asks(f, "found")) ?? null;
}

const asks = (form, code) => form.steps.some((s) => s.asks.some((a) => a.reading === code));
/** Outlets behind another device answer for it; a device that protects is dead by its own button, which is another question. */
const asksDead = (form, device) => form.steps.some((s) => s.asks.some((a) => a.reading === "load_dead_when_tripped" && (a.when ?? []).some((w) => w.field === "kind" && [w.is].flat().includes(device.kind))));

/**
 * The entry of an outlet noted while its protector was tripped, the rest not measured for that reason; null where nothing
 * is to be said: a live one whose form does not ask.
 */
export function darkEntry({ device, form, limitSet, said }) {
  const asked = asksDead(form, device);
  if (said === "live" && !asked) return null;
  const answers = asked ? { load_dead_when_tripped: { pick: said === "dark" ? "yes" : "no" } } : { found: { pick: "no-power" } };
  return lockedEntry({ device, form, limitSet, reason: said === "dark" ? "circuit-dead" : "other", answers });
}

/** Critical loads that TEST at a protector takes the power from, its own place's first. */
export function criticalLoads(devices, places, protector) {
  const loads = [places.get(protector.place), ...behind(devices, protector).map((d) => places.get(d.place))].map((p) => p?.critical_load).filter((l) => typeof l === "string" && l !== "");
  return [...new Set(loads)];
}
