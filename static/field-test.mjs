// The page of one test: the form's steps in their order, judged as it is typed, and the one button that saves it.

import { html, useState } from "./vendor/htm-preact.mjs";
import { Ask } from "./field-ask.mjs";
import { contextOf, Foot, Mark, titleOf, Where } from "./field-parts.mjs";
import { fillMissing, quickAnswers, rowId } from "./flow.mjs";
import { conditionKey, isTouched, seriesAnswers } from "./draft.mjs";
import { Reason } from "./field-correct.mjs";
import { ResetsAt } from "./field-dark.mjs";
import { Photos } from "./field-photo.mjs";
import { PassOver, TellFirst } from "./field-pass.mjs";
import { toDevice, toTest } from "./route.mjs";
import { showNumber } from "./number.mjs";
import { missingReasons } from "./reading.mjs";
import { showDay } from "./days.mjs";

/** props: app, test — what app.openTest(device, task) gives. */
export function TestPage({ app, test }) {
  const { say } = app;
  const { device, place, form, draft, walked } = test;
  const detailed = !form.quick || draft.detailed === true;
  const [asked, setAsked] = useState(false); // Save was pressed while questions were open
  const set = (answers, more) => app.answers(draft, answers, more);
  const quickDone = form.quick && sameAnswers(draft.answers, quickAnswers(form));
  const open = walked.open.length;
  const unreasoned = draft.corrects && draft.reason.trim() === "";
  const ready = isTouched(draft) && open === 0 && walked.broken.length === 0 && !unreasoned;
  const fill = (reason) => {
    const { answers, series } = fillMissing(walked, draft, reason);
    set(answers, { series });
  };
  const save = () => {
    if (ready) return app.save(test);
    setAsked(true);
    const id = walked.broken[0] ?? walked.open[0]?.id ?? (unreasoned ? "reason" : undefined);
    requestAnimationFrame(() => (document.getElementById(`ask-${id}`) ?? document.querySelector("main")).scrollIntoView({ block: "center" }));
  };
  return html`
    <${Where} app=${app} title=${titleOf(app, device, place)} tag=${device.tag} context=${contextOf(app, device, place)}
      progress=${test.round.of > 1 ? say("field.place_in_round", { n: test.round.n, of: test.round.of }) : ""} back=${toDevice(device.id)} />
    <main>
      <h2 class="task">${draft.corrects ? say("correct.title", { task: say(`task.${form.task}`) }) : say(`task.${form.task}`)}</h2>
      ${test.loads.length > 0 && html`<p class="caution"><b>${say("field.critical_load", { load: test.loads.join("; ") })}</b> ${say("field.critical_load_do")}</p>`}
      <${TellFirst} app=${app} places=${[place]} />
      ${walked.readings.found?.value === "no-power" && html`<${ResetsAt} app=${app} device=${device} dead />`}
      ${form.quick && !detailed
        ? html`<${Quick} app=${app} form=${form} test=${test} done=${quickDone} set=${set} open=${() => set({}, { detailed: true })} />`
        : html`
          ${usesInstrument(form) && html`<${Instruments} app=${app} draft=${draft} instruments=${test.instruments} today=${test.today} />`}
          ${walked.steps.map((step) => html`<${Step} app=${app} key=${step.step} step=${step} test=${test} set=${set} />`)}`}
      ${(detailed || quickDone) && html`<${Summary} app=${app} test=${test} open=${open} />`}
      ${detailed && open > 0 && (isTouched(draft) || asked) && html`<${Rest} app=${app} open=${open} asked=${asked} fill=${fill} />`}
      ${(detailed || quickDone) && html`<section class="ask"><label class="q" for="note">${say("field.note")}</label>
        <textarea id="note" rows="2" value=${draft.note} onInput=${(e) => app.note(draft, e.currentTarget.value)}></textarea></section>`}
      ${draft.corrects ? html`<${Reason} app=${app} draft=${draft} />` : (detailed || quickDone) && html`<${Photos} app=${app} draft=${draft} />`}
      ${!draft.corrects && (test.next || test.onRound) && html`<${PassOver} app=${app} test=${test} />`}
    </main>
    <${Foot} app=${app}><button type="button" class="big go" aria-disabled=${String(!ready)} disabled=${app.state.saving} onClick=${save}>${say(draft.corrects ? "correct.keep" : test.next ? "field.save_next" : "field.save")}</button><//>`;
}

const sameAnswers = (a, b) => Object.keys(a).length === Object.keys(b).length && Object.keys(b).every((k) => a[k]?.pick === b[k].pick);

const usesInstrument = (form) => form.steps.some((s) => s.asks.some((a) => a.type === "number"));

/** The one-tap form: one button writes exactly the answers it states. What must be known before the TEST stands above it,
 *  in full for the first test in a room; what matters afterwards stands below. */
function Quick({ app, form, test, done, set, open }) {
  const { say } = app;
  const pressed = form.steps.findIndex((s) => s.asks.some((a) => a.reading === "button_trips"));
  const before = form.steps.slice(0, pressed + 1).map((s) => s.step);
  const cautions = (which) => [...new Set(test.walked.steps.filter(which).flatMap((s) => s.cautions))];
  return html`<section class="ask quick">
    <details class="caution" open=${test.firstInRoom}><summary>${say("field.before_test")}</summary>${cautions((s) => before.includes(s.step)).map((c) => html`<p key=${c}>${say(`caution.${c}`)}</p>`)}</details>
    <button type="button" class="big one-tap" aria-pressed=${String(Boolean(done))} onClick=${() => set(done ? {} : quickAnswers(form))}>${say(form.quick.texts?.[test.device.kind] ?? form.quick.text)}</button>
    ${done && html`<div class="caution">${cautions((s) => !before.includes(s.step)).map((c) => html`<p key=${c}>${say(`caution.${c}`)}</p>`)}</div>`}
    <button type="button" class="big" onClick=${open}>${say("field.something_else")}</button>
    <details class="writes"><summary>${say("field.quick_writes")}</summary><dl>${Object.entries(form.quick.readings).map(([code, value]) => html`
      <div key=${code}><dt>${say(`reading.${code}.ask`)}</dt><dd>${answerWord(say, code, value)}</dd></div>`)}</dl></details>
  </section>`;
}

const answerWord = (say, code, value) => [`option.${code}.${value}`, `option.${value}`, `field.${value}`].map((k) => (say.has(k) ? say(k) : null)).find(Boolean) ?? value;

function Instruments({ app, draft, instruments, today }) {
  const { say } = app;
  const chosen = instruments.find((i) => i.id === draft.instrument);
  const expired = chosen?.calibration_due && chosen.calibration_due < today;
  return html`<section class="ask"><label class="q" for="instrument">${say("field.instrument")}</label>
    <select id="instrument" value=${draft.instrument ?? ""} onChange=${(e) => app.instrument(draft, e.currentTarget.value || null)}>
      <option value="">${say("field.no_instrument")}</option>
      ${instruments.map((i) => html`<option key=${i.id} value=${i.id}>${[i.name, i.serial].filter(Boolean).join(" · ")}</option>`)}
    </select>
    ${chosen?.calibration_due && html`<div class="under quiet">${expired
      ? html`<${Mark} verdict="watch">${say("field.calibration_expired", { day: showDay(app, chosen.calibration_due) })}<//>`
      : say("field.calibrated_until", { day: showDay(app, chosen.calibration_due) })}</div>`}
  </section>`;
}

function Step({ app, step, test, set }) {
  const { say } = app;
  const { draft } = test;
  return html`<div class="step">
    <h3>${say(`step.${step.step}`)}</h3>
    ${step.cautions.map((c) => html`<p class="caution" key=${c}>${say(`caution.${c}`)}</p>`)}
    ${step.closed && html`<p class="closed">${say(step.closed)}</p>`}
    ${step.asks.map((ask) => html`<${Ask} app=${app} key=${ask.reading} ask=${ask} answer=${draft.answers[ask.reading]}
      set=${(a) => set(withOne(draft.answers, ask.reading, a))} title=${titleAt(app, ask, test)} ...${test.about(ask)} />`)}
    ${step.proves && (step.asks.length > 0 || step.series.length > 0) && html`<details class="writes"><summary>${say("step.shows")}</summary><p>${say(step.proves)}</p><p>${say(step.proves_not)}</p></details>`}
    ${step.series.map((row) => html`<${Condition} app=${app} key=${conditionKey(row.at)} row=${row} test=${test} />`)}
  </div>`;
}

function withOne(answers, code, answer) {
  const next = { ...answers };
  if (answer === undefined) delete next[code];
  else next[code] = answer;
  return next;
}

/** A question in the words of the device kind; the trip time is asked "at 6.8 mA", since its limit belongs to that current. */
function titleAt(app, ask, test) {
  const current = test.walked.readings.test_current_ma?.value;
  if (ask.reading === "mark" && test.mark) return html`${app.say("field.mark_put_on")} <b class=${`mark ${test.mark.colour ?? ""}`}>${test.mark.word}</b> <span class="quiet">${app.say("field.mark_days", { from: showDay(app, test.mark.from), until: showDay(app, test.mark.until) })}</span>`;
  const own = ask.texts?.[test.device.kind] ?? ask.text;
  if (own) return app.say(own);
  if (ask.reading !== "trip_time_ms" || typeof current !== "number") return undefined;
  return app.say("field.at_current", { what: app.say(`reading.${ask.reading}.ask`), current: showNumber(current) });
}

/** The questions put again under one of the form's conditions; one that stands alone is named by them. */
function Condition({ app, row, test }) {
  const { at, asks } = row, words = conditionWords(app.say, at, test.given);
  return html`<div class="condition">${asks.length > 1 && html`<h4>${words}</h4>`}
    ${asks.map((ask, i) => html`<${Ask} app=${app} key=${ask.reading} id=${rowId(at, ask)} ask=${{ ...ask, required: i === 0 }} answer=${seriesAnswers(test.draft, at)[ask.reading]}
      title=${asks.length > 1 ? undefined : app.say("field.under_condition", { what: ask.name ?? app.say(`reading.${ask.reading}.ask`), condition: words })}
      set=${(a) => app.seriesAnswer(test.draft, at, ask.reading, a)} ...${test.aboutAt(ask, at)} />`)}
  </div>`;
}

/** "5 × 30 mA, starting at 180°", "Upper face". */
export function conditionWords(say, at, given) {
  const parts = [];
  if (at.multiple !== undefined) parts.push(say("field.condition.multiple", { multiple: at.multiple === 0.5 ? "½" : showNumber(at.multiple), ma: given.rated_residual_ma ? showNumber(at.multiple * given.rated_residual_ma) : "?" }));
  if (at.phase_deg !== undefined) parts.push(say("field.condition.phase", { deg: at.phase_deg }));
  if (at.waveform !== undefined) parts.push(say(`option.waveform.${at.waveform}`));
  if (at.face !== undefined) parts.push(say(`option.face.${at.face}`));
  return parts.join(", ");
}

/** One reason for everything that is left. */
function Rest({ app, open, asked, fill }) {
  const { say } = app;
  return html`<section class=${asked ? "ask rest asked" : "ask rest"} id="open">
    <span class="q" id="q-rest">${say("field.open_count", { n: open })}</span>
    <p class="hint">${say("field.rest_hint")}</p>
    <div class="pick" role="group" aria-labelledby="q-rest">${missingReasons.map((r) => html`<button type="button" key=${r} onClick=${() => fill(r)}>${say(`missing.${r}`)}</button>`)}</div>
  </section>`;
}

/** What the form calls a check an organisation added. */
const ownName = (form, code) => form.steps.flatMap((s) => s.asks).find((a) => a.reading === code && a.name)?.name;

/** The result so far, and each thing that is not inside its limit. */
function Summary({ app, test, open }) {
  const { say } = app;
  const { result, findings } = test.verdict;
  if (!isTouched(test.draft)) return null;
  const telling = findings.filter((f) => !["pass", "not-judged"].includes(f.verdict) && !(f.verdict === "missing" && open > 0));
  return html`<section class=${`result ${result}`} aria-live="polite">
    <h2>${open > 0 && result === "incomplete" ? html`<${Mark} verdict="incomplete">${say("field.open_count", { n: open })}<//>` : html`<${Mark} verdict=${result}>${say(`verdict.${result}`)}<//>`}</h2>
    ${telling.length > 0 && html`<ul>${telling.map((f, i) => html`<li key=${i}><${Mark} verdict=${f.verdict}>${ownName(test.form, f.reading) ?? say(`reading.${f.reading}.name`)}${f.at ? ` (${conditionWords(say, f.at, test.given)})` : ""}<//> ${f.text ? say(f.text) : say(`verdict.${f.verdict}`)}</li>`)}</ul>`}
  </section>`;
}
