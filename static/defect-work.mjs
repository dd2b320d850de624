// What a phone knows and says of defects: those of its copy, with its own facts and its own failing tests laid over. Pure.

/** A record about everything that is open at a device: a phone makes a device safe, not a cause. */
export const saidFact = (kind, device, how, newId) => ({ kind, subject: newId(), body: { device: device.id, how } });

/** Open defects of a device: [{id, cause, severity, text, safe, repaired, due, parts}]. A failing test of this phone that the
 *  copy does not know yet stands as one, and what was said after it counts for it. */
export function openDefects(device) {
  const list = (device.defects ?? []).map((d) => ({ ...d, ...(device.made_safe ? { safe: device.made_safe } : {}), ...(device.repaired ? { repaired: true } : {}) }));
  const fails = Object.entries(device.last ?? {}).filter(([, l]) => l.own && l.result === "fail");
  if (list.length === 0) for (const [task, l] of fails) list.push({ id: l.entry, cause: `task:${task}`, severity: "unsafe", safe: device.made_safe, repaired: Boolean(device.repaired) });
  return list;
}

/** Other devices on the circuit of one: what its breaker takes the power from as well. */
export function onSameCircuit(devices, device) {
  if (!device.circuit) return [];
  return devices.filter((d) => d.id !== device.id && d.panel === device.panel && d.circuit === device.circuit);
}
