import { test } from "node:test";
import assert from "node:assert/strict";
import { readFileSync } from "node:fs";
import { figure, portion, scaled, root } from "./format.js";

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

test("a share is never said to be none or all when it is not", () => {
  const rows = [[0, "none"], [1, "all"], [0.0005, "under 0.1 %"], [0.00301, "0.3 %"], [0.0495, "5.0 %"], [0.125, "13 %"], [0.5, "50 %"], [0.993, "99.3 %"], [0.9996, "over 99.9 %"], [null, "–"]];
  for (const [share, want] of rows) assert.equal(portion(share).replace("\u00a0", " "), want);
});
