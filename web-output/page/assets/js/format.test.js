import { test } from "node:test";
import assert from "node:assert/strict";
import { readFileSync } from "node:fs";
import { figure, scaled, root } from "./format.js";

test("figure agrees with the table made by hand", () => {
  const rows = JSON.parse(readFileSync(new URL("../../testdata/figures.json", import.meta.url)));
  for (const [v, digits, want] of rows) assert.equal(figure(v, digits), want, `${v} with ${digits} digits`);
});

test("null stays null", () => {
  assert.equal(scaled(null, 2), null);
  assert.equal(scaled(3, null), null);
  assert.equal(scaled(3, 2), 6);
  assert.equal(root(null), null);
  assert.equal(root(9), 3);
});
