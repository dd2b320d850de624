// A small strict reader of one line of JSON: it says what JSON.parse keeps quiet about (names that stand twice, numbers
// that are no longer exact, depth). Text in, {value} or {code, at} out. Objects come back as Map, so that no name is special.

const maxDepth = 100;

class Refused extends Error {
  constructor(code, at) {
    super(code);
    this.code = code;
    this.at = at;
  }
}

/** Reads a line; the answer is {value} or {code: malformed | duplicate_name | number_range, at}, with the value where it could still be read. */
export function scan(line) {
  try {
    const reader = new Reader(line);
    const value = reader.value(1);
    if (reader.peek() !== "") throw new Refused("malformed", reader.at);
    // A line that is no JSON, or names something twice, is that first, whatever its numbers say.
    if (reader.late) return { ...reader.late, value };
    return { value };
  } catch (e) {
    if (e instanceof Refused) return { code: e.code, at: e.at };
    throw e;
  }
}

class Reader {
  constructor(line) {
    this.line = line;
    this.at = 0;
    this.late = null;
  }

  /** The next character that is no space, "" at the end. */
  peek() {
    while (this.line[this.at] === " " || this.line[this.at] === "\t") this.at++;
    return this.line[this.at] ?? "";
  }

  fail(code = "malformed") {
    throw new Refused(code, this.at);
  }

  keepLate(code) {
    this.late ??= { code, at: this.at };
  }

  value(depth) {
    const c = this.peek();
    if (c === "{" || c === "[") {
      if (depth > 1000) this.fail();
      if (depth > maxDepth) this.keepLate("malformed");
      return c === "{" ? this.object(depth) : this.list(depth);
    }
    if (c === '"') return this.text();
    for (const [word, value] of [["true", true], ["false", false], ["null", null]]) {
      if (this.line.startsWith(word, this.at)) {
        this.at += word.length;
        return value;
      }
    }
    return this.number();
  }

  object(depth) {
    const members = new Map();
    this.at++;
    if (this.peek() === "}") return this.at++, members;
    for (;;) {
      if (this.peek() !== '"') this.fail();
      const name = this.text();
      if (members.has(name)) this.fail("duplicate_name");
      if (this.peek() !== ":") this.fail();
      this.at++;
      members.set(name, this.value(depth + 1));
      const c = this.peek();
      this.at++;
      if (c === "}") return members;
      if (c !== ",") this.fail();
    }
  }

  list(depth) {
    const all = [];
    this.at++;
    if (this.peek() === "]") return this.at++, all;
    for (;;) {
      all.push(this.value(depth + 1));
      const c = this.peek();
      this.at++;
      if (c === "]") return all;
      if (c !== ",") this.fail();
    }
  }

  text() {
    const found = /"(?:[^"\\\u0000-\u001f]|\\(?:["\\/bfnrt]|u[0-9a-fA-F]{4}))*"/y;
    found.lastIndex = this.at;
    const m = found.exec(this.line);
    if (!m) this.fail();
    const text = JSON.parse(m[0]);
    if (!text.isWellFormed()) this.fail();
    this.at += m[0].length;
    return text;
  }

  number() {
    const found = /-?(0|[1-9][0-9]*)(\.[0-9]+)?([eE][+-]?[0-9]+)?/y;
    found.lastIndex = this.at;
    const m = found.exec(this.line);
    if (!m) this.fail();
    if (tooLarge(m)) this.keepLate("number_range");
    this.at += m[0].length;
    return Number(m[0]);
  }
}

/** Beyond 2^53: by its digits where it is written plainly, by its nearest double where it has an exponent. */
function tooLarge([all, whole, fraction = "", exponent]) {
  if (exponent) return Math.abs(Number(all)) > 2 ** 53;
  const limit = "9007199254740992";
  if (whole.length !== limit.length) return whole.length > limit.length;
  return whole > limit || (whole === limit && /[1-9]/.test(fraction));
}
