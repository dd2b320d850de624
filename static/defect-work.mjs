// What a phone knows and says of defects: those of its copy, with its own facts and its own failing tests laid over. Pure.

import { behind } from "./protection-map.mjs";

/** A record about everything that is open at a device: a phone makes a device safe, not a cause. */
export const saidFact = (kind, device, how, newId) => ({ kind, subject: newId(), body: { device: device.id, how } });

/** How bad it is, the worst first (forms/defect.go). */
export const SEVERITIES = ["unsafe", "repair", "nuisance"];

/** A defect somebody saw. typed: {text, severity, parts} as written; parts parted by commas. */
export function openedFact({ device, typed, photos, newId }) {
  const parts = (typed.parts ?? "").split(/[,;\n]/).map((p) => p.trim()).filter(Boolean);
  return { kind: "defect.opened", subject: newId(), body: { device: device.id, text: typed.text.trim(), severity: typed.severity, ...(parts.length > 0 ? { parts } : {}), ...(photos.length > 0 ? { photos } : {}) } };
}

/** Open defects of a device: [{id, cause, severity, text, safe, repaired, due, parts}]. A failing test of this phone that the
 *  copy does not know yet stands as one, and what was said after it counts for it. */
export function openDefects(device) {
  const list = (device.defects ?? []).map((d) => (d.own ? d : { ...d, ...(device.made_safe ? { safe: device.made_safe } : {}), ...(device.repaired ? { repaired: true } : {}) }));
  const fails = Object.entries(device.last ?? {}).filter(([, l]) => l.own && l.result === "fail");
  if (list.length === 0) for (const [task, l] of fails) list.push({ id: l.entry, cause: `task:${task}`, severity: "unsafe", safe: device.made_safe, repaired: Boolean(device.repaired) });
  return list;
}

/** What the breaker of a device takes the power from as well: the others of its circuit and what hangs behind any of them; those
 *  with a critical load first. places: Map id → place. */
export function onSameCircuit(devices, device, places = new Map()) {
  if (!device.circuit) return [];
  const on = devices.filter((d) => d.panel === device.panel && d.circuit === device.circuit), found = new Set(on);
  for (const d of on) for (const b of behind(devices, d)) found.add(b);
  found.delete(device);
  const loads = (d) => Boolean(places.get(d.place)?.critical_load);
  return [...found].filter((d) => d.id !== device.id).sort((a, b) => Number(loads(b)) - Number(loads(a)));
}
