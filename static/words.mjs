// The words catalogue on the phone: the same file, places and plural rule as words.go.

/** Flattens a catalogue tree to dotted keys. */
function flatten(tree, prefix, flat) {
  for (const [k, v] of Object.entries(tree)) {
    const key = prefix ? `${prefix}.${k}` : k;
    if (typeof v === "string") flat.set(key, { one: v, other: v });
    else if (typeof v.one === "string" && typeof v.other === "string" && Object.keys(v).length === 2) flat.set(key, v);
    else flatten(v, key, flat);
  }
  return flat;
}

/** Gives say(key, places) over a catalogue; an unknown key comes back as it is. */
export function speaker(catalogue) {
  const flat = flatten(catalogue, "", new Map());
  const say = (key, places = {}) => {
    const entry = flat.get(key);
    if (!entry) return key;
    const text = String(places.n) === "1" ? entry.one : entry.other;
    return text.replace(/\{([a-z_]+)\}/g, (whole, name) => (name in places ? String(places[name]) : whole));
  };
  say.has = (key) => flat.has(key);
  return say;
}
