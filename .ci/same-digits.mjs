// Compares two results files: everything equal, numbers to ten significant digits; one that is the difference of others beside it, such as a bias, to
// ten digits of a thousandth of the largest of them.
// node same-digits.mjs A.json B.json
import { readFileSync } from "node:fs";

const [a, b] = process.argv.slice(2).map((f) => JSON.parse(readFileSync(f)));
let numbers = 0, worst = 0;
function same(x, y, path, size) {
  if (typeof x === "number" && typeof y === "number") {
    numbers++;
    const gap = Math.abs(x - y) / Math.max(Math.abs(x), Math.abs(y), size * 1e-3, 1e-300);
    worst = Math.max(worst, gap);
    if (gap > 1e-10) throw new Error(`${path}: ${x} and ${y}`);
    return;
  }
  if (typeof x !== typeof y || (x === null) !== (y === null)) throw new Error(`${path}: ${x} and ${y}`);
  if (x !== null && typeof x === "object") {
    const keys = Object.keys(x);
    if (keys.join() !== Object.keys(y).join()) throw new Error(`${path}: other keys`);
    let largest = 0;
    for (const k of keys) if (typeof x[k] === "number") largest = Math.max(largest, Math.abs(x[k]));
    for (const k of keys) same(x[k], y[k], `${path}.${k}`, largest);
    return;
  }
  if (x !== y) throw new Error(`${path}: ${x} and ${y}`);
}
same(a, b, "results", 0);
console.log(`${numbers} numbers agree, the worst gap is ${worst.toExponential(1)}`);
