// The envelope of a record: holding a line against the rules a store holds it against. The phone writes records with
// record-line.mjs and does not carry this. Says the same as
// store/record (codes and fields; the sentences are the server's). Pure.

import { parseClock } from "./clock.mjs";
import { scan } from "./json-scan.mjs";
import { isTag } from "./tag.mjs";

export const maxBytes = 65536;

export { newId, timeText, writeRecord } from "./record-line.mjs";

/** Holds a line against the rules: null, or {code, field} of the first one broken. */
export function checkRecord(line) {
  if (new TextEncoder().encode(line).length > maxBytes) return { code: "too_large", field: "" };
  if (/[\n\r]/.test(line) || !line.isWellFormed()) return { code: "malformed", field: "" };
  const read = scan(line);
  if ("value" in read && !(read.value instanceof Map)) return { code: "malformed", field: "" };
  if (read.code) return { code: read.code, field: "" };
  return checkEnvelope(read.value) ?? checkKind(read.value);
}

const isId = (v) => typeof v === "string" && /^[0-9a-f]{8}-[0-9a-f]{4}-[78][0-9a-f]{3}-[89ab][0-9a-f]{3}-[0-9a-f]{12}$/.test(v);
const isCount = (v) => Number.isInteger(v) && v >= 1;

/** RFC 3339, T and Z in upper case, up to nine digits after a point, an offset always. */
export function isTime(v) {
  const m = typeof v === "string" && /^(\d{4})-(\d\d)-(\d\d)T(\d\d):(\d\d):(\d\d)(\.\d{1,9})?(Z|[+-](\d\d):(\d\d))$/.exec(v);
  if (!m) return false;
  const [year, month, day, hour, minute, second, , , oh = "0", om = "0"] = m.slice(1);
  const last = month >= 1 && month <= 12 ? new Date(Date.UTC(2000 + (year % 400), month, 0)).getUTCDate() : 0;
  return day >= 1 && day <= last && hour <= 23 && minute <= 59 && second <= 59 && oh <= 23 && om <= 59;
}

const envelope = {
  id: isId, kind: (v) => typeof v === "string" && v !== "", v: (v) => isCount(v) && v <= 0x7fffffff,
  log: (v) => v === "org" || v === "office" || isId(v), subject: isId, at: isTime, clock: (v) => parseClock(v) !== null,
  by: isId, from: isId, n: isCount, body: (v) => v instanceof Map,
};

function checkEnvelope(record) {
  for (const [name, value] of record) {
    if (Object.hasOwn(envelope, name) && !envelope[name](value)) return { code: "bad_envelope", field: name };
  }
  for (const name of Object.keys(envelope)) if (!record.has(name)) return { code: "bad_envelope", field: name };
  return null;
}

/** The kinds there are, their logs, the members of their bodies; the same lines as in store/record/kinds.go. */
export const kindTable = `
site.registered        site      set:set!
site.set               site      set:set! seen:stamp
place.registered       site      set:set! seen:stamp
place.set              site      set:set! seen:stamp
panel.set              site      set:set! seen:stamp
circuit.set            site      set:set! seen:stamp
device.registered      site      set:set! seen:stamp
device.set             site      set:set! seen:stamp
device.retired         site      reason:text! on:day
device.replaced        site      with:id! reason:text on:day
tag.bound              site      tag:tag!
tag.freed              site      tag:tag!
entry.made             site      form:form! readings:readings! series:series given:object shown:object source:text read_by:text typed_by:text note:text photos:list round:id
entry.imported         site      form:form! readings:readings series:series given:object shown:object day:day result:text source:text read_by:text typed_by:text note:text photos:list
entry.corrected        site      entry:id! readings:readings! series:series given:object reason:text!
entry.withdrawn        site      entry:id! reason:text!
round.made             site      set:set! seen:stamp
round.set              site      set:set! seen:stamp
round.closed           site      day:day! done:number left:number skipped:number back:number proved:object instrument:text passed:list
round.accepted         site      note:text
defect.opened          site      device:id! text:text! cause:text severity:text protector:id due:day parts:list photos:list
defect.noted           site      device:id! text:text severity:text due:day parts:list photos:list
defect.made_safe       site      device:id! how:text! photos:list
defect.assigned        site      device:id! to:id crew:text due:day parts:list
defect.repaired        site      device:id! how:text! parts:list photos:list
defect.closed          site      device:id! reason:text
defect.reopened        site      device:id! reason:text!
occasion.noted         site      cause:text! on:day! devices:ids tasks:list text:text
pause.set              site      from:day! until:day! devices:ids reason:text!
record.refused         any       id:text sha256:hash! from:text n:number code:text!
record.admitted        any       reason:text!
record.sealed          any       reason:text!
forms.set              org       form:object! reason:text
limits.set             org,site  limits:object! reason:text
plan.set               org,site  plan:object! reason:text
usual.set              org,site  usual:object! reason:text
instrument.set         org       set:wide! seen:stamp
instrument.calibrated  org       on:day! due:day certificate:text out:bool errors:object file:hash file_name:text
instrument.proved      org       on:day! tag:tag works:bool where:text
person.set             org       role:role! active:bool!
tags.minted            org       tags:tags!
grant.set              office    role:role! all:bool! sites:ids active:bool! from:day to:day until:day may:list
signed.in              office
export.taken           office    what:text! site:text from:text to:text
access.used            office    on:day! what:text! site:id
installation.enrolled  office    installation:id!
installation.revoked   office    installation:id!
book.restored          office    epoch:number! logs:list
`;

const kinds = new Map(kindTable.trim().split("\n").map((line) => {
  const [name, logs, ...body] = line.trim().split(/ +/);
  return [name, { logs: logs.split(","), body: body.map((b) => {
    const [member, shape] = b.split(":");
    return { member, shape: shape.replace("!", ""), must: shape.endsWith("!") };
  }) }];
}));

function checkKind(record) {
  const kind = record.get("kind"), log = record.get("log"), body = record.get("body");
  const known = kinds.get(kind);
  if (!known) return { code: "unknown_kind", field: "kind" };
  if (record.get("v") !== 1) return { code: "unknown_kind", field: "v" };
  const logClass = log === "org" || log === "office" ? log : "site";
  if (known.logs[0] !== "any" && !known.logs.includes(logClass)) return { code: "wrong_log", field: "log" };
  if ((kind === "site.registered" || kind === "site.set") && log !== record.get("subject")) return { code: "wrong_log", field: "log" };
  const field = badMember(known.body, body) ?? badMeaning(kind, record.get("subject"), body);
  return field === null ? null : { code: "bad_body", field };
}

/** The first member of a body that is not what its kind asks for, null where all are. */
function badMember(members, body) {
  for (const [name, value] of body) {
    const m = members.find((x) => x.member === name);
    if (!m || (value === null && !m.must)) continue;
    const bad = shapes[m.shape](value, m.must, name);
    if (bad !== null) return bad;
  }
  const absent = members.find((m) => m.must && !body.has(m.member));
  return absent ? absent.member : null;
}

const isText = (v) => typeof v === "string";
const isNumber = (v) => typeof v === "number";
const isField = (v) => /^[a-z][a-z0-9_]{0,63}$/.test(v);
const listOf = (is) => (v) => Array.isArray(v) && v.every(is);
const plain = (is) => (v, must, name) => (is(v, must) ? null : name);
const isDay = (v) => isText(v) && v.length === 10 && isTime(v + "T00:00:00Z");

const shapes = {
  text: plain((v, must) => isText(v) && (!must || v !== "")),
  bool: plain((v) => typeof v === "boolean"),
  number: plain(isNumber),
  object: plain((v) => v instanceof Map),
  list: plain(Array.isArray),
  day: plain((v, must) => isDay(v) || (!must && v === "")),
  id: plain(isId),
  ids: plain(listOf(isId)),
  stamp: plain((v) => parseClock(v) !== null),
  hash: plain((v) => isText(v) && /^[0-9a-f]{64}$/.test(v)),
  tag: plain(isTag),
  tags: plain(listOf(isTag)),
  form: plain((v) => isText(v) && /^[a-z0-9-]+\/[a-z0-9-]+$/.test(v)),
  role: plain((v) => v === "manager" || v === "crew" || v === "auditor"),
  set: (v, must, name) => badSet(v, name, false),
  wide: (v, must, name) => badSet(v, name, true),
  readings: badReadings,
  series: badSeries,
};

/** A map of field → text, number, true/false, null or list of texts; wide lets fields be objects too. */
function badSet(v, name, wide) {
  if (!(v instanceof Map) || v.size === 0) return name;
  for (const [field, value] of v) {
    const ok = Array.isArray(value) ? value.every(isText) : !(value instanceof Map) || wide;
    if (!isField(field) || !ok) return `${name}.${field}`;
  }
  return null;
}

function badReadings(v, must, name) {
  if (!(v instanceof Map)) return name;
  for (const [code, reading] of v) if (!isField(code) || !isReading(reading)) return `${name}.${code}`;
  return null;
}

function badSeries(v, must, name) {
  if (!Array.isArray(v)) return name;
  for (const item of v) {
    if (!(item instanceof Map)) return name;
    for (const [code, value] of item) {
      const ok = code === "at" ? value instanceof Map && [...value.values()].every(isScalar) : isField(code) && isReading(value);
      if (!ok) return `${name}.${code}`;
    }
  }
  return null;
}

const isScalar = (v) => v !== null && typeof v !== "object";

/** Exactly one of value, above, below, no_trip, missing; beside it typed and unit. A bare value is taken too. */
function isReading(v) {
  if (!(v instanceof Map)) return isScalar(v);
  let says = 0;
  for (const [name, value] of v) {
    const is = readingMembers.get(name);
    if (!is || !is(value)) return false;
    if (name !== "typed" && name !== "unit") says++;
  }
  return says === 1;
}

const readingMembers = new Map([
  ["typed", isText], ["unit", isText], ["value", isScalar], ["above", isNumber], ["below", isNumber],
  ["no_trip", (v) => v === true], ["missing", (v) => isText(v) && v !== ""],
]);

const filled = (v) => isText(v) && v !== "";

/** A stop of a round: a device and a task, such as ID/button. */
const isStop = (v) => isText(v) && isId(v.slice(0, 36)) && /^\/[a-z0-9-]+$/.test(v.slice(36));

/** Rules of single kinds that a table of members does not say. */
function badMeaning(kind, subject, body) {
  const set = body.get("set");
  switch (kind) {
    case "site.registered":
      if (!isText(set.get("code")) || !/^[A-Za-z0-9-]{2,12}$/.test(set.get("code"))) return "set.code";
      if (!filled(set.get("name"))) return "set.name";
      return !set.has("standard") || set.get("standard") === "NEC" || set.get("standard") === "IEC" ? null : "set.standard";
    case "device.registered":
      return filled(set.get("kind")) ? null : "set.kind";
    case "round.made":
      return Array.isArray(set.get("stops")) && set.get("stops").length > 0 && set.get("stops").every(isStop) ? null : "set.stops";
    case "round.set":
      return !set.has("stops") || (Array.isArray(set.get("stops")) && set.get("stops").every(isStop)) ? null : "set.stops";
    case "entry.imported":
      return body.get("readings") instanceof Map || (filled(body.get("day")) && filled(body.get("result"))) ? null : "readings";
    case "entry.corrected":
    case "entry.withdrawn":
      return body.get("entry") === subject ? null : "entry";
  }
  return null;
}
