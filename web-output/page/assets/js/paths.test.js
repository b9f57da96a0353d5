import test from "node:test";
import assert from "node:assert/strict";
import { unpackPaths } from "./paths.js";

test("packed steps come back by name, and nothing else changes", () => {
  const alternatives = [{ tuning: null }, { tuning: { path: [{ value: 0, coefficients: [], derived: [] }, { value: 1, coefficients: [], derived: [] }] } }];
  unpackPaths(alternatives, { 1: [[[[1, 2, 3, 4]], []], [[[5, null, 7, 8]], [[9, 10, 11, 12]]]] });
  assert.deepEqual(alternatives, [{ tuning: null }, { tuning: { path: [
    { value: 0, coefficients: [{ estimate: 1, standardError: 2, estimatedBias: 3, estimatedMSE: 4 }], derived: [] },
    { value: 1, coefficients: [{ estimate: 5, standardError: null, estimatedBias: 7, estimatedMSE: 8 }], derived: [{ estimate: 9, standardError: 10, estimatedBias: 11, estimatedMSE: 12 }] },
  ] } }]);
});
