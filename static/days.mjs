// Days and moments as the crew reads them. Days are YYYY-MM-DD texts, which also compare as they are. Pure.

/** The day of a moment in a time zone. */
export function dayIn(ms, zone) {
  try {
    return writer("en-CA", { timeZone: zone || "UTC", year: "numeric", month: "2-digit", day: "2-digit" }).format(ms);
  } catch {
    return new Date(ms).toISOString().slice(0, 10); // a zone this browser does not know
  }
}

/** Writers of dates are slow to make and lists want hundreds: each is made once. */
const writers = new Map();
function writer(locale, options) {
  const key = locale + JSON.stringify(options);
  if (!writers.has(key)) writers.set(key, new Intl.DateTimeFormat(locale, options));
  return writers.get(key);
}

/** Days before months and 24 hours, in the language of the words. */
const localeOf = (app) => (app.say?.lang === "es" ? "es" : "en-GB");

/** "Mon 30 Nov 2026"; the year only where it is not this one. */
export function showDay(app, day) {
  const [y, m, d] = String(day).split("-").map(Number);
  if (!y) return "";
  const thisYear = dayIn(app.now()).slice(0, 4) === String(y);
  return writer(localeOf(app), { weekday: "short", day: "numeric", month: "short", ...(thisYear ? {} : { year: "numeric" }), timeZone: "UTC" })
    .format(Date.UTC(y, m - 1, d)).replace(",", "").replaceAll(" ", "\u00a0");
}

/** "09:12", or "Mon 30 Nov, 09:12" for another day; in the phone's own zone, which is where the reader stands. */
export function showMoment(app, ms) {
  const at = new Date(ms), now = new Date(app.now());
  const time = writer(localeOf(app), { hour: "2-digit", minute: "2-digit" }).format(at);
  return at.toDateString() === now.toDateString() ? time : `${showDay(app, localDay(at))}, ${time}`;
}

const two = (n) => String(n).padStart(2, "0");
const localDay = (d) => `${d.getFullYear()}-${two(d.getMonth() + 1)}-${two(d.getDate())}`;

/** How old a copy is, as people say it. */
export function ageWords(say, taken, now) {
  const minutes = Math.max(0, Math.floor((now - taken) / 60_000));
  if (minutes < 2) return say("phone.age.now");
  if (minutes < 60) return say("phone.age.minutes", { n: minutes });
  if (minutes < 48 * 60) return say("phone.age.hours", { n: Math.floor(minutes / 60) });
  return say("phone.age.days", { n: Math.floor(minutes / 1440) });
}
