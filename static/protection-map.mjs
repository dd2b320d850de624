// The protection map as a phone's copy knows it: what power passes on its way to an outlet, and what goes dark with a device.
// Pure. What the map leaves out on the server (a ring) is walked round once here: a caution names rather too much.

const CIRCUIT_HEADS = ["gfci-breaker", "rcd", "rcbo"];

/** Kinds at the head of a circuit, which protect all of it. */
export const protectsCircuit = (device) => CIRCUIT_HEADS.includes(device.kind);

/** Kinds that switch off on a ground fault. */
export const protects = (device) => protectsCircuit(device) || device.kind === "gfci-receptacle" || device.kind === "portable-gfci";

const circuit = (device) => device.fields?.circuit;

/** What a device hangs on: the one whose LOAD terminals feed it, then what protects its circuit. */
function sources(devices, device) {
  const named = device.fields?.fed_by, from = named ? devices.filter((d) => d.id === named) : [];
  if (!circuit(device) || protectsCircuit(device)) return from;
  return [...from, ...devices.filter((d) => d.id !== named && protectsCircuit(d) && circuit(d) === circuit(device))];
}

/** What hangs on a device: those that name it, and for a breaker everything else of its circuit. */
export function hangOn(devices, device) {
  const head = protectsCircuit(device) && circuit(device);
  return devices.filter((d) => d.id !== device.id && (d.fields?.fed_by === device.id || (head && circuit(d) === head && !protectsCircuit(d))));
}

function walk(first, next) {
  const met = new Set([first.id]), found = [];
  for (const todo = [first]; todo.length > 0;) {
    for (const d of next(todo.shift())) {
      if (met.has(d.id)) continue;
      met.add(d.id);
      found.push(d);
      todo.push(d);
    }
  }
  return found;
}

/** Every device power passes on its way to one, nearest first. */
export const ahead = (devices, device) => walk(device, (d) => sources(devices, d));

/** Every device that goes dark with one, nearest first. */
export const behind = (devices, device) => walk(device, (d) => hangOn(devices, d));
