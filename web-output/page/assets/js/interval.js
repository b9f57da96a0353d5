// Intervals as small pictures on a common axis. Reads no data; the twin of axis and mark in content.go.
import { figure } from "./format.js";

// newAxis spans the values, and reaches for more of them by no more than half that span at either end.
export function newAxis(values, more = []) {
  const axis = { low: 0, high: 0, ticks: [] };
  const span = (list, low, high) => {
    for (const v of list) {
      if (v === null || v === undefined || !Number.isFinite(v)) continue;
      axis.low = Math.min(axis.low, Math.max(low, v));
      axis.high = Math.max(axis.high, Math.min(high, v));
    }
  };
  span(values, -Infinity, Infinity);
  if (axis.high === axis.low) axis.high = axis.low + 1;
  const reach = (axis.high - axis.low) / 2;
  span(more, axis.low - reach, axis.high + reach);
  const step = niceStep((axis.high - axis.low) / 4);
  for (let k = Math.ceil(axis.low / step); k * step <= axis.high + step * 1e-9; k++) axis.ticks.push([at(axis, k * step), figure(k * step, 3)]);
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

// stretch places an interval on an axis; an end that lies beyond it is cut there. null where there is nothing to place.
export function stretch(axis, again) {
  if (!again || again.low === null || again.high === null) return null;
  const { low, high } = again;
  return { from: at(axis, Math.min(axis.high, Math.max(axis.low, low))), to: at(axis, Math.max(axis.low, Math.min(axis.high, high))), cutLow: low < axis.low, cutHigh: high > axis.high };
}

// drawInterval fills an svg: the band behind, zero, the mark, and below it the interval of the procedure repeated. band and mark are
// {estimate, low, high, again: {low, high}} or null.
export function drawInterval(svg, axis, band, mark, hollow) {
  const parts = [];
  const height = Number(svg.getAttribute("height"));
  const [middle, top] = height > 26 ? [12, 10.5] : [13, 11.5];
  const rect = (cls, m, y, h) => {
    const from = at(axis, m.low);
    parts.push(node("rect", [["class", cls], ["x", from + "%"], ["y", y], ["width", Math.max(0, at(axis, m.high) - from).toFixed(2) + "%"], ["height", h]]));
  };
  const line = (cls, from, to, y1, y2) => parts.push(node("line", [["class", cls], ["x1", from + "%"], ["x2", to + "%"], ["y1", y1], ["y2", y2]]));
  const end = (x, cut, d) => {
    if (!cut) return line("cap", x, x, 23, 31);
    const arrow = node("svg", [["class", "arrow"], ["x", x + "%"], ["y", 27], ["width", 1], ["height", 1]]);
    arrow.append(node("path", [["d", d]]));
    parts.push(arrow);
  };
  if (band && band.low !== null && band.high !== null) rect("band", band, 0, height);
  line("zero", at(axis, 0), at(axis, 0), 0, height);
  if (mark && mark.estimate !== null) {
    if (mark.low !== null && mark.high !== null) rect("bar", mark, top, 3);
    parts.push(node("circle", [["class", hollow ? "hollow" : "dot"], ["cx", at(axis, mark.estimate) + "%"], ["cy", middle], ["r", 5]]));
  }
  const again = mark ? stretch(axis, mark.again) : null;
  if (again) {
    line("again", again.from, again.to, 27, 27);
    end(again.from, again.cutLow, "M-4 0L4 -4.5V4.5Z");
    end(again.to, again.cutHigh, "M4 0L-4 -4.5V4.5Z");
  }
  svg.replaceChildren(...parts);
}
