import { test } from "node:test";
import assert from "node:assert/strict";
import { readFileSync } from "node:fs";
import { inKind, kindsOf, kindLines, whole } from "./kinds.js";

test("every kind is said as in the table made by hand", () => {
  const rows = JSON.parse(readFileSync(new URL("../../testdata/kinds.json", import.meta.url)));
  for (const r of rows) {
    const errors = { ...r, coefficients: [{ se: r.se, p: r.p }], derived: [] };
    assert.deepEqual(kindLines(r.kinds, errors, kindsOf(errors, false, 0), r.estimate, 1), r.lines);
  }
});

test("another kind moves the interval and leaves the rest", () => {
  const errors = { t: [2, 3], degrees: [9, 8], reasons: ["", ""], coefficients: [{ se: [1, 0.5], p: [0.1, 0.2] }, { se: [], p: [] }, { se: [1, null], p: [1, null] }], derived: [] };
  const c = { estimate: 4, standardError: 1, low: 2, high: 6, estimatedBias: 7 };
  assert.equal(inKind(c, errors, kindsOf(errors, false, 0), 0), c);
  assert.deepEqual(inKind(c, errors, kindsOf(errors, false, 0), 1), { estimate: 4, standardError: 0.5, low: 2.5, high: 5.5, estimatedBias: 7 });
  assert.equal(inKind(c, errors, kindsOf(errors, false, 1), 1), c);
  assert.deepEqual(inKind(c, errors, kindsOf(errors, false, 2), 1), { estimate: 4, standardError: null, low: null, high: null, estimatedBias: 7 });
  assert.equal(kindsOf(errors, true, 0), null);
});

test("units scale the error and leave its t-ratio", () => {
  const errors = { t: [2], degrees: [9], reasons: [""] };
  assert.deepEqual(kindLines([{ kind: "classical" }], errors, { se: [1], p: [0.25] }, 4, 10), [["classical", "standard error 10.0, t-ratio 4.00 with 9 degrees of freedom, p-value 0.250, interval 20.0 to 60.0"]]);
  assert.deepEqual(kindLines([{ kind: "classical" }], errors, { se: [1], p: [0.25] }, 4, null), [["classical", "none"]]);
});

test("a text becomes a sentence", () => {
  assert.equal(whole("écart: x"), "Écart: x.");
});
