import { test } from "node:test";
import assert from "node:assert/strict";
import { readFileSync } from "node:fs";
import { newAxis, at, niceStep, stretch } from "./interval.js";
import { beyond } from "./ladder.js";

test("zero is always on the axis, ticks are round", () => {
  const axis = newAxis([0.2, 0.31, null]);
  assert.equal(axis.low, 0);
  assert.equal(axis.high, 0.31);
  assert.deepEqual(axis.ticks.map(([, t]) => t), ["0", "0.100", "0.200", "0.300"]);
  assert.equal(at(axis, 0), 2);
  assert.equal(at(axis, 0.31), 98);
});

test("an axis of nothing is still an axis", () => {
  const axis = newAxis([null, NaN]);
  assert.ok(axis.high > axis.low);
});

test("steps are 1, 2 or 5 times a power of ten", () => {
  assert.equal(niceStep(0.7), 1);
  assert.equal(niceStep(1.2), 2);
  assert.equal(niceStep(30), 50);
  assert.equal(niceStep(60), 100);
});

test("the axis reaches for repeated intervals, and cuts them, as in the table made by hand", () => {
  const rows = JSON.parse(readFileSync(new URL("../../testdata/axes.json", import.meta.url)));
  for (const r of rows) {
    const axis = newAxis(r.values, r.more);
    assert.deepEqual([axis.low, axis.high], [r.low, r.high], r.note);
    const again = { low: r.again[0], high: r.again[1] };
    assert.deepEqual(stretch(axis, again), r.from === null ? null : { from: r.from, to: r.to, cutLow: r.cutLow, cutHigh: r.cutHigh }, r.note);
    assert.equal(beyond(axis, again), r.beyond, r.note);
  }
});
