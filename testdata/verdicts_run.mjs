// Runs lines through the judge in JavaScript for the Go test: reads {catalogue, lines} on stdin, writes {codes, answers}
// on stdout, each answer a JSON string {"result",…} or {"error":{code, field, text}}.
import { readFileSync } from "node:fs";
import { judgeLine } from "../static/judge-line.mjs";
import { JudgeVersion, limitsFor } from "../static/judge.mjs";
import { Refusal, codes, missingReasons } from "../static/reading.mjs";

const { catalogue, lines } = JSON.parse(readFileSync(0, "utf8"));
const answers = lines.map((line) => {
  try {
    return JSON.stringify(judgeLine(catalogue, line));
  } catch (e) {
    if (!(e instanceof Refusal)) throw e;
    return JSON.stringify({ error: { code: e.code, field: e.field, text: e.text } });
  }
});
const set = (id) => catalogue.limit_sets.find((s) => s.limit_set === id);
const limits = lines.map((line) => {
  const form = catalogue.forms.find((f) => f.form === line?.form);
  if (!form) return null;
  const entry = { given: line.given, readings: line.readings, series: line.series };
  return ["trip_time_ms", "trip_current_ma", "retention_g"].map((code) => limitsFor(form, set(form.limit_set), entry, code));
});
process.stdout.write(JSON.stringify({ judge: JudgeVersion, codes, missing: missingReasons, answers, limits }));
