import { test } from "node:test";
import assert from "node:assert/strict";
import { readFileSync } from "node:fs";
import { coefficientOf, inUnits, order, atPoint, quantileOf, unitOf, told, posterior } from "./ladder.js";

const coefficient = (name, estimate, standardError) => ({ name, estimate, standardError, low: estimate - 2 * standardError, high: estimate + 2 * standardError, estimatedBias: 0.5, estimatedMSE: 4, status: "estimated" });
const alternative = {
  coefficients: [coefficient("constant", 1, 1), coefficient("__proto__", 3, 0.5)], derived: [coefficient("effect of x", 7, 1)],
  tuning: { path: [{ coefficients: [{}, { estimate: 2, standardError: 0.25, estimatedBias: -1, estimatedMSE: 1.0625 }], derived: [] }] },
};

test("names are compared, never keys", () => {
  assert.equal(coefficientOf(alternative, { name: "__proto__", derived: false }).place, 1);
  assert.equal(coefficientOf(alternative, { name: "constructor", derived: false }), null);
  assert.equal(coefficientOf(alternative, { name: "effect of x", derived: true }).value.estimate, 7);
});

test("units scale what has a unit", () => {
  const c = inUnits(alternative.coefficients[1], 10);
  assert.deepEqual([c.estimate, c.se, c.low, c.high, c.bias, c.root], [30, 5, 20, 40, 5, 20]);
  assert.equal(unitOf({ sd: null }, "sd"), null);
  assert.equal(unitOf({ sd: 4 }, "raw"), 1);
});

test("a step of a path keeps the alternative's own t factor", () => {
  assert.equal(quantileOf(alternative), 2);
  const row = atPoint(alternative, { name: "__proto__", derived: false }, 0, 1);
  assert.deepEqual([row.estimate, row.low, row.high], [2, 1.5, 2.5]);
  assert.equal(atPoint(alternative, { name: "effect of x", derived: true }, 0, 1), null);
});

test("order sorts, and puts what has no number last", () => {
  const rows = [{ se: 3 }, { se: null }, { se: 1 }, null, { se: 2 }];
  assert.deepEqual(order(rows, "se", false), [2, 4, 0, 1, 3]);
  assert.deepEqual(order(rows, "se", true), [0, 4, 2, 1, 3]);
  assert.deepEqual(order(rows, null, false), [0, 1, 2, 3, 4]);
});

test("what was resampled is said as in the table made by hand", () => {
  const rows = JSON.parse(readFileSync(new URL("../../testdata/told.json", import.meta.url)));
  for (const r of rows) assert.equal(told(inUnits({ resampled: r.resampled }, 1).again, r.estimate, r.run), r.text);
});

test("what was resampled takes the unit too; without a unit nothing is said", () => {
  const c = { ...coefficient("x", 1, 1), posteriorSD: 0.5, resampled: { standardError: 2, low: -1, high: 3, biasCorrected: { low: null, high: 4 }, sharePositive: 0.9, shareNegative: 0.1, used: 99 } };
  const row = inUnits(c, 10);
  assert.deepEqual([row.again.se, row.again.low, row.again.high, row.again.correctedLow, row.again.correctedHigh, row.again.positive, row.posterior], [20, -10, 30, null, 40, 0.9, 5]);
  assert.equal(inUnits(c, null).again, null);
  assert.equal(posterior(inUnits(c, null).posterior), "");
});
