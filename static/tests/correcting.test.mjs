import test from "node:test";
import assert from "node:assert/strict";
import { answerOf, correctionBody, correctionDraft } from "../correcting.mjs";
import { readAnswer } from "../answer.mjs";

const number = { reading: "trip_time_ms", type: "number", units: ["ms", "s"] }, choice = { reading: "wiring", type: "choice" };

test("correcting: what was recorded comes back into the draft and is recorded the same again", () => {
  for (const [ask, answer] of [[number, { typed: "24", unit: "ms" }], [number, { typed: "0,5", unit: "s" }], [number, { typed: "310", unit: "ms", gave_up: true }], [number, { typed: "", gave_up: true }],
    [number, { typed: "<5", unit: "ms" }], [number, { typed: ">300", unit: "ms" }], [choice, { pick: "correct" }], [choice, { missing: "no-access" }]]) {
    const { reading } = readAnswer(ask, answer);
    assert.ok(reading, JSON.stringify(answer));
    assert.deepEqual(readAnswer(ask, answerOf(reading)).reading, reading, JSON.stringify(answer));
  }
});

test("correcting: the draft is of the newest saying, the body names the entry and gives the reason", () => {
  const record = JSON.stringify({ id: "e1", subject: "d1", log: "s1", at: "2026-12-01T08:00:00Z", body: { form: "f/instrument", given: { instrument: "i1" }, readings: { wiring: { value: "correct" } }, series: [{ at: { multiple: 5 }, trip_time_ms: { typed: "24", unit: "ms", value: 24 } }] } });
  const draft = correctionDraft({ record, newer: null, task: "instrument", now: 1 });
  assert.deepEqual([draft.key, draft.corrects, draft.answers.wiring, draft.series[0].answers.trip_time_ms.typed, draft.instrument], ["correct|e1", "e1", { pick: "correct" }, "24", "i1"]);
  assert.deepEqual(correctionDraft({ record, newer: { readings: { wiring: { value: "open-ground" } } }, task: "instrument", now: 1 }).answers, { wiring: { pick: "open-ground" } });
  const body = correctionBody({ draft: { ...draft, reason: " misread " }, readings: {}, series: [], given: { instrument: "i1" }, was: "i1" });
  assert.deepEqual(body, { entry: "e1", readings: {}, reason: "misread" });
});
