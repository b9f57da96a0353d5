import { test } from "node:test";
import assert from "node:assert/strict";
import { describe as say } from "./tuning.js";

test("a step is said in words", () => {
  const unknown = { parameter: "components", chosen: 1, path: [{ value: 0, effectiveDegrees: 0, error: 4 }, { value: 1, effectiveDegrees: null, error: 2.25 }] };
  assert.equal(say(unknown, 1), "1 of 1; cross-validated error 1.500; the chosen value");
  const t = { parameter: "penalty", chosen: 1, path: [{ value: 0, effectiveDegrees: 6, error: 4 }, { value: 0.05, effectiveDegrees: 4.5, error: 2.25 }] };
  assert.equal(say(t, 0), "0 (least squares); 6.00 effective degrees of freedom; cross-validated error 2.000");
  assert.equal(say(t, 1), "0.0500; 4.50 effective degrees of freedom; cross-validated error 1.500; the chosen value");
});
