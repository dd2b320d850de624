// Fields of the register as a record's `set` changes them. Pure.

/** Fields with a set laid over; null clears. */
export function setsFields(fields = {}, set) {
  const out = { ...fields };
  for (const [name, value] of Object.entries(set)) {
    if (value === null) delete out[name];
    else out[name] = value;
  }
  return out;
}

/** Only what differs from what is known, so that a change states no more than it changes; empty texts clear. null where nothing does. */
export function changedFields(known = {}, typed) {
  const set = {};
  for (const [name, raw] of Object.entries(typed)) {
    const value = typeof raw === "string" && raw.trim() === "" ? null : typeof raw === "string" ? raw.trim() : raw;
    if ((known[name] ?? null) !== value) set[name] = value;
  }
  return Object.keys(set).length > 0 ? set : null;
}

/** A set without what is empty, for something new. */
export function filledFields(typed) {
  return changedFields({}, typed) ?? {};
}
