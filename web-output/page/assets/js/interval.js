// Intervals as small pictures on a common axis. Reads no data; the twin of axis and mark in content.go.
import { figure } from "./format.js";

export function newAxis(values) {
  let low = 0, high = 0;
  for (const v of values) {
    if (v === null || v === undefined || !Number.isFinite(v)) continue;
    low = Math.min(low, v);
    high = Math.max(high, v);
  }
  if (high === low) high = low + 1;
  const axis = { low, high, ticks: [] };
  const step = niceStep((high - low) / 4);
  for (let k = Math.ceil(low / step); k * step <= high + step * 1e-9; k++) axis.ticks.push([at(axis, k * step), figure(k * step, 3)]);
  return axis;
}

export function niceStep(raw) {
  const base = Math.pow(10, Math.floor(Math.log10(raw)));
  for (const m of [1, 2, 5, 10]) if (m * base >= raw) return m * base;
  return 10 * base;
}

export function at(axis, v) {
  return Math.round((2 + (96 * (v - axis.low)) / (axis.high - axis.low)) * 100) / 100;
}

const space = "http://www.w3.org/2000/svg";

export function node(name, attributes, text) {
  const n = document.createElementNS(space, name);
  for (const [k, v] of attributes) n.setAttribute(k, v);
  if (text !== undefined) n.textContent = text;
  return n;
}

// drawTicks fills an svg with the axis' labels.
export function drawTicks(svg, axis) {
  svg.replaceChildren(...axis.ticks.map(([x, text]) => node("text", [["x", x + "%"], ["y", 12], ["text-anchor", "middle"]], text)));
}

// drawInterval fills an svg: the band behind, zero, and the mark. band and mark are {estimate, low, high} or null.
export function drawInterval(svg, axis, band, mark, hollow) {
  const parts = [];
  const rect = (cls, m, y, h) => {
    const from = at(axis, m.low);
    parts.push(node("rect", [["class", cls], ["x", from + "%"], ["y", y], ["width", Math.max(0, at(axis, m.high) - from).toFixed(2) + "%"], ["height", h]]));
  };
  if (band && band.low !== null && band.high !== null) rect("band", band, 0, 26);
  parts.push(node("line", [["class", "zero"], ["x1", at(axis, 0) + "%"], ["x2", at(axis, 0) + "%"], ["y1", 0], ["y2", 26]]));
  if (mark && mark.estimate !== null) {
    if (mark.low !== null && mark.high !== null) rect("bar", mark, 11.5, 3);
    parts.push(node("circle", [["class", hollow ? "hollow" : "dot"], ["cx", at(axis, mark.estimate) + "%"], ["cy", 13], ["r", 5]]));
  }
  svg.replaceChildren(...parts);
}
