// One question, one row: choices, yes or no, or a number with its unit, limit, scale and verdict under it.

import { html } from "./vendor/htm-preact.mjs";
import { Mark, markOf } from "./field-parts.mjs";
import { Scale } from "./field-scale.mjs";
import { limitWords, outsideWords, unitWord, withUnit } from "./limit-words.mjs";
import { readAnswer, unitOf } from "./answer.mjs";
import { showNumber } from "./number.mjs";
import { missingReasons } from "./reading.mjs";
import { showDay } from "./days.mjs";

/**
 * props: app, ask, answer, set(answer), findings (of this reading, most telling first), bounds (of the limit that decides,
 * known before anything is typed), last ({value, day, at, comparable} of the last test), title (replaces the question's
 * text), folded (an optional question nobody has opened: one line).
 */
export function Ask(props) {
  const { app, ask, answer, set, title, id = ask.reading } = props;
  const { say } = app;
  const words = title ?? ask.name ?? say(`reading.${ask.reading}.ask`);
  const numeric = ask.type === "number";
  if (props.folded && answer === undefined) {
    return html`<button type="button" class="folded" id=${`ask-${id}`} onClick=${() => app.unfold(ask)}><span>${words}</span><span class="add">${say("field.add")}</span></button>`;
  }
  return html`<section class="ask" id=${`ask-${id}`}>
    <div class="q-line">
      ${numeric ? html`<label class="q" for=${`in-${id}`}>${words}</label>` : html`<span class="q" id=${`q-${id}`}>${words}</span>`}
      ${(ask.required || ask.expected) && answer?.missing === undefined && html`<button type="button" class="skip" onClick=${() => set({ missing: "" })}>${say(numeric ? "field.not_measured" : "field.cannot_say")}</button>`}
    </div>
    ${answer?.missing !== undefined ? html`<${Missing} ...${props} id=${id} />`
      : numeric ? html`<${NumberField} ...${props} id=${id} />`
      : html`<${Choices} ...${props} id=${id} />`}
    <${Found} ...${props} />
  </section>`;
}

/** Why there is no answer. */
function Missing({ app, answer, set, id }) {
  const { say } = app;
  return html`<div class="pick" role="group" aria-labelledby=${`q-${id}`}>
    ${missingReasons.map((r) => html`<button type="button" key=${r} aria-pressed=${String(answer.missing === r)} onClick=${() => set({ missing: r })}>${say(`missing.${r}`)}</button>`)}
    <button type="button" class="plain" onClick=${() => set(undefined)}>${say("field.measure_after_all")}</button>
  </div>`;
}

function Choices({ app, ask, answer, set, id }) {
  const { say } = app;
  const options = ask.type === "yes-no" ? ["yes", "no"] : ask.options;
  const word = (o) => (say.has(`option.${ask.reading}.${o}`) ? say(`option.${ask.reading}.${o}`) : say.has(`option.${o}`) ? say(`option.${o}`) : say.has(`field.${o}`) ? say(`field.${o}`) : o);
  return html`<div class="pick" role="group" aria-labelledby=${`q-${id}`}>
    ${options.map((o) => html`<button type="button" key=${o} aria-pressed=${String(answer?.pick === o)}
      onClick=${() => set(answer?.pick === o ? undefined : { pick: o })}>${word(o)}</button>`)}
    ${(ask.offer_missing ?? []).map((r) => html`<button type="button" key=${r} aria-pressed="false" onClick=${() => set({ missing: r })}>${say(`missing.${r}`)}</button>`)}
  </div>`;
}

function NumberField({ app, ask, answer, set, bounds, hint, findings, last, id }) {
  const { say } = app;
  const own = unitOf(ask), units = ask.units ?? [own];
  const { reading, error } = readAnswer(ask, answer);
  const unit = reading?.unit ?? answer?.unit ?? own;
  const put = (change) => {
    const next = { typed: "", unit, ...answer, ...change };
    set(next.typed.trim() === "" && !next.gave_up ? undefined : next);
  };
  return html`
    <div class="entry">
      <input id=${`in-${id}`} inputmode="decimal" autocomplete="off" enterkeyhint="next" value=${answer?.typed ?? ""}
        placeholder=${answer?.gave_up ? say("field.stopped_at") : ""} aria-invalid=${error ? "true" : null} aria-describedby=${`under-${id}`}
        onInput=${(e) => put({ typed: e.currentTarget.value })} onKeyDown=${toNextField} />
      ${units.length > 1
        ? html`<div class="units" role="group" aria-label=${say("field.unit")}>${units.map((u) => html`<button type="button" key=${u} aria-pressed=${String(u === unit)} onClick=${() => put({ unit: u, typed: bareNumber(answer?.typed) })}>${unitWord(say, u)}</button>`)}</div>`
        : html`<span class="unit">${unitWord(say, own)}</span>`}
    </div>
    ${ask.bound && html`<button type="button" class="bound" aria-pressed=${String(Boolean(answer?.gave_up))} onClick=${() => put({ gave_up: !answer?.gave_up })}>${say(boundWord(say, ask))}</button>`}
    ${answer?.gave_up && html`<p class="hint">${say("field.stopped_hint", { unit: unitWord(say, unit) })}</p>`}
    ${ask.scale && html`<${Scale} scale=${ask.scale} bounds=${bounds} value=${reading?.value ?? reading?.above ?? reading?.below}
      beyond=${reading?.above !== undefined ? "above" : reading?.below !== undefined ? "below" : null} last=${last?.comparable ? last.value : undefined}
      colour=${markOf(findings[0]?.verdict)} label=${scaleLabel(say, ask, own, bounds, reading, last)} />`}
    <div id=${`under-${id}`}>
      ${hint && !error && html`<p class="hint">${say(hint)}</p>`}
      ${error && html`<p class="bad">${say(`field.number.${error}`)}</p>`}
      <div class="under">
        ${reading && findings[0] && html`<${Mark} verdict=${findings[0].verdict}>${outsideWords(say, findings[0], own, reading)}<//>`}
        <span class="quiet">${[bounds && limitWords(say, bounds, own, bounds.level), lastWords(app, last, own)].filter(Boolean).join(" · ")}</span>
      </div>
      ${slower(ask, reading, last) > 0 && html`<p class="todo">${say("field.much_slower", { times: showNumber(slower(ask, reading, last), 2) })}</p>`}
    </div>`;
}

/** Last time's figure; its test current is named where it was another one, since times at two currents do not compare. */
function lastWords(app, last, unit) {
  if (!last) return "";
  const places = { value: withUnit(app.say, last.value, unit), day: showDay(app, last.day), current: last.at !== undefined ? withUnit(app.say, last.at, "mA") : "" };
  return app.say(last.comparable ? "field.last" : "field.last_at", places);
}

/** How many times slower than last time at the same current; 0 unless it is far beyond what an instrument's doubt explains. */
function slower(ask, reading, last) {
  if (ask.reading !== "trip_time_ms" || !last?.comparable || typeof reading?.value !== "number") return 0;
  const times = reading.value / last.value;
  return times >= 3 ? times : 0;
}

/** A unit chosen by button replaces one that was typed. */
const bareNumber = (typed = "") => typed.replace(/[^\d.,<>' ]/g, "").trim();

/** Enter goes on to the next number, as the keyboard's key says. */
function toNextField(e) {
  if (e.key !== "Enter") return;
  e.preventDefault();
  const fields = [...document.querySelectorAll(".entry input")];
  const next = fields[fields.indexOf(e.currentTarget) + 1];
  if (next) next.focus();
  else e.currentTarget.blur();
}

const boundWord = (say, ask) => (say.has(`field.gave_up.${ask.reading}`) ? `field.gave_up.${ask.reading}` : "field.gave_up.other");

function scaleLabel(say, ask, own, bounds, reading, last) {
  const shown = reading?.value ?? reading?.above ?? reading?.below;
  return [shown !== undefined ? `${showNumber(shown)} ${unitWord(say, own)}` : say("field.nothing_typed"),
    say("field.scale_from_to", { from: showNumber(ask.scale.from), to: showNumber(ask.scale.to) }),
    bounds && limitWords(say, bounds, own, bounds.level),
    last && say("field.last_plain", { value: withUnit(say, last.value, own) })].filter(Boolean).join("; ");
}

/** What the limits say of it: verdict of a choice, and what to do. */
function Found({ app, ask, findings, answer }) {
  if (!answer || answer.missing !== undefined) return null;
  const telling = findings.filter((f) => !["pass", "missing"].includes(f.verdict));
  return html`
    ${ask.type !== "number" && telling[0] && html`<div class="under"><${Mark} verdict=${telling[0].verdict}>${app.say(`verdict.${telling[0].verdict}`)}<//></div>`}
    ${telling.filter((f) => f.text).map((f) => html`<p class="todo" key=${f.text}>${app.say(f.text)}</p>`)}`;
}
