// Tags on labels: six Crockford characters and an ISO 7064 MOD 37,36 check character that is itself none of I, L, O, U.
// Says the same as store/record/tag.go. Phones never make tags, they read and bind them.

const crockford = "0123456789ABCDEFGHJKMNPQRSTVWXYZ";
const alphanumeric = "0123456789ABCDEFGHIJKLMNOPQRSTUVWXYZ";

/** The ISO 7064 MOD 37,36 check character of digits and capital letters. */
export function checkCharacter(text) {
  let p = 36;
  for (const c of text) p = (((p + alphanumeric.indexOf(c)) % 36 || 36) * 2) % 37;
  return alphanumeric[(37 - p) % 36];
}

/** Whether a text is a tag in its stored form: seven capital characters, the last of them right. */
export function isTag(text) {
  return typeof text === "string" && text.length === 7 && [...text].every((c) => crockford.includes(c)) && checkCharacter(text.slice(0, 6)) === text[6];
}

/** Reads a tag as people write and scan it, or a label's address (its host is never looked at); null where the check character does not fit. */
export function parseTag(text) {
  if (typeof text !== "string" || text.length > 256) return null;
  let s = text.trim().toUpperCase();
  const at = s.indexOf("/T/");
  if (at >= 0) s = s.slice(at + 3).split("?")[0].split("#")[0].replace(/\/$/, "");
  s = s.replace(/[- \u00a0\u2010-\u2013]/g, "").replace(/[IL]/g, "1").replace(/O/g, "0");
  return isTag(s) ? s : null;
}

/** K7Q-M2P-3, with hyphens that no line breaks at. */
export const showTag = (tag) => (tag.length === 7 ? `${tag.slice(0, 3)}\u2011${tag.slice(3, 6)}\u2011${tag.slice(6)}` : tag);
