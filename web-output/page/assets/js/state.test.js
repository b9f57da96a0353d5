import { test } from "node:test";
import assert from "node:assert/strict";
import { readState, writeState, emptyState, setPosition, position } from "./state.js";

const limits = { choices: 4, rungs: 9, kinds: 3, truths: 4, truthsOf: 2, paths: [[7, 101], [8, 12]] };

test("a state survives the address", () => {
  const s = emptyState();
  Object.assign(s, { choice: 2, unit: "sd", kind: 2, truth: 3, truthOf: 1, sort: "se", down: true, hidden: [3, 1] });
  setPosition(s, 7, 55);
  const back = readState("#" + writeState(s), limits);
  assert.deepEqual(back, { ...s, hidden: [1, 3] });
});

test("nonsense is left at the default", () => {
  assert.deepEqual(readState("#c=99&e=3&w=-1&v=two&u=yards&s=__proto__&h=x.-1.400&t7=1000&t6=3", limits), emptyState());
  assert.deepEqual(readState("", limits), emptyState());
});

test("a slider goes back to the chosen value", () => {
  const s = emptyState();
  setPosition(s, 8, 3);
  setPosition(s, 8, 4);
  assert.equal(position(s, 8), 4);
  setPosition(s, 8, null);
  assert.equal(position(s, 8), null);
  assert.equal(writeState(s), "");
});
