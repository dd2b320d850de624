// What somebody typed or scanned, taken as a label's tag where it is meant as one. Pure.

import { parseTag } from "./tag.mjs";
import { bareTag, roundRead } from "./route.mjs";

/**
 * {tag} where it is one; {error: words key} where it was meant as one and its check character does not fit; {} where it is
 * something else or not typed to its end. whole: it came from a code, so nothing more follows.
 */
export function tagTyped(text, { whole = false } = {}) {
  const tag = parseTag(text);
  if (tag) return { tag };
  if (whole) return { error: "scan.not_ours" };
  if (/[^0-9a-z\s\u2010-\u2013-]/i.test(text.trim())) return {};
  const bare = bareTag(text);
  if (bare.length < 7 || !/\d/.test(text) || /\s\S+\s\S+\s\S+\s/.test(text)) return {};
  return { error: bare.length > 7 ? "scan.too_long" : "scan.check" };
}

/** The page of what a code names, a label or the sheet of a round: {value: "#tag=K7QM2P3"} or {error}. */
export function pageRead(text) {
  const { tag, error } = tagTyped(text, { whole: true }), page = roundRead(text) ?? (tag && `#tag=${tag}`);
  return page ? { value: page } : { error };
}
