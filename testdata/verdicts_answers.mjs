// Judges lines in JavaScript for the Go tests: {catalogue, lines} → {judge, codes, missing, answers, limits}, each answer
// a JSON string {"result",…} or {"error":{code, field, text}}. Pure, so that node and a browser run the very same file.
import { judgeLine } from "../static/judge-line.mjs";
import { JudgeVersion, limitsFor } from "../static/judge.mjs";
import { Refusal, codes, missingReasons } from "../static/reading.mjs";

export function answersTo({ catalogue, lines }) {
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
  return { judge: JudgeVersion, codes, missing: missingReasons, answers, limits };
}
