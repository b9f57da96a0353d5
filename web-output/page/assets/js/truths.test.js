import { test } from "node:test";
import assert from "node:assert/strict";
import { readFileSync } from "node:fs";
import { simulatedNames, truthRow, of, drawn } from "./truths.js";
import { tenth, give, points } from "./format.js";

test("a row under a truth is as in the table made by hand", () => {
  const rows = JSON.parse(readFileSync(new URL("../../testdata/truths.json", import.meta.url)));
  for (const r of rows) {
    const a = { coefficients: [{ name: "x", status: r.status }], derived: [], simulation: [r.simulation] };
    const row = truthRow(a, "as-estimated", "x");
    assert.deepEqual([row.said, row.hollow, tenth(row.coverage), points(row.coverageError), give(row.biasError)], [r.said, r.hollow, r.coverage, r.points, r.give], r.note);
    const d = drawn(row);
    assert.deepEqual(d === null ? [null, null, null] : [d.x, d.from, d.width], [r.at, r.from, r.width], r.note);
  }
});

test("coefficients are listed once, in order; an effect is named as one", () => {
  assert.deepEqual(simulatedNames([{ simulation: [{ coefficient: "b" }, { coefficient: "b" }] }, { simulation: [{ coefficient: "a" }] }]), ["b", "a"]);
  assert.equal(of("effect of x"), "the effect of x");
  assert.equal(of("x"), "the coefficient of x");
});
