import test from "node:test";
import assert from "node:assert/strict";
import { readdirSync, readFileSync } from "node:fs";
import { limitSetFor } from "../judging.mjs";
import { lockedEntry, ROOM_REASONS } from "../room-locked.mjs";

const data = new URL("../../forms/data/", import.meta.url);
const read = (dir) => readdirSync(new URL(dir, data)).flatMap((f) => JSON.parse(readFileSync(new URL(dir + f, data))));
const forms = read("forms/"), sets = read("limits/");

test("room locked: one reason makes every form of every kind an entry that says nothing was tested", () => {
  let seen = 0;
  for (const form of forms) for (const kind of form.kinds) for (const reason of ROOM_REASONS) {
    const device = { id: "d", kind, fields: { nominal_v: 120, rated_residual_ma: 30 } };
    const { verdict, readings } = lockedEntry({ device, form, limitSet: limitSetFor(device, form, sets), reason });
    assert.equal(verdict.result, "not-tested", `${form.form} of ${kind}: ${reason}`);
    assert.ok(Object.values(readings).every((r) => r.missing === reason));
    seen++;
  }
  assert.ok(seen > 20);
});
