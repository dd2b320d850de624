// The lines of a Go test under node: {catalogue, lines} on stdin, what verdicts_answers.mjs makes of them on stdout.
import { readFileSync } from "node:fs";
import { answersTo } from "./verdicts_answers.mjs";

process.stdout.write(JSON.stringify(answersTo(JSON.parse(readFileSync(0, "utf8")))));
