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

/** The languages there are catalogues of; English stands in where another says nothing. */
export const LANGUAGES = ["en", "es"];

/** The language of ours that a browser's list of wishes puts first. */
export function languageOf(wishes = []) {
  for (const wish of wishes) {
    const lang = String(wish).slice(0, 2).toLowerCase();
    if (LANGUAGES.includes(lang)) return lang;
  }
  return "en";
}

/** Gives say(key, places) over a catalogue, with another to fall back on; an unknown key comes back as it is. say.lang: for dates. */
export function speaker(catalogue, { fallback = {}, lang = "en" } = {}) {
  const flat = flatten(catalogue, "", flatten(fallback, "", new Map()));
  const say = (key, places = {}) => {
    const entry = flat.get(key);
    if (!entry) return key;
    const text = String(places.n) === "1" ? entry.one : entry.other;
    return text.replace(/\{([a-z_]+)\}/g, (whole, name) => (name in places ? String(places[name]) : whole));
  };
  say.lang = lang;
  say.has = (key) => flat.has(key);
  return say;
}
