// If this were the truth: coverage, bias and spread of each alternative under one of the truths simulated. Reads alternatives[].simulation.
import { figure, portion, tenth, give, points } from "./format.js";
import { at, node } from "./interval.js";
import { whole } from "./kinds.js";

const shares = { low: 0, high: 1 };
const nominal = 0.95;

// simulatedNames lists the coefficients that were simulated, in order.
export function simulatedNames(alternatives) {
  const out = [];
  for (const a of alternatives) for (const s of a.simulation) if (!out.includes(s.coefficient)) out.push(s.coefficient);
  return out;
}

const none = { true: null, bias: null, biasError: null, sd: null, sdError: null, rmse: null, rmseError: null, coverage: null, coverageError: null, wrongSign: null };

// truthRow states one alternative under one truth. The twin of truthRowOf in truths.go.
export function truthRow(alternative, truth, coefficient) {
  const s = alternative.simulation.find((k) => k.truth === truth && k.coefficient === coefficient);
  if (!s) return { ...none, said: "no such coefficient", hollow: false };
  if (s.sd === 0) return { ...s, coverage: null, coverageError: null, wrongSign: null, said: "set to zero", hollow: false };
  const found = [...alternative.derived, ...alternative.coefficients].find((k) => k.name === coefficient);
  const hollow = !found || !["estimated", "implied", "zero"].includes(found.status);
  const said = [hollow ? "a different quantity, in truth " + figure(s.true, 3) : "", s.coverage === null ? "no interval" : ""];
  return { ...s, said: said.filter((t) => t).join("; "), hollow };
}

// of names a coefficient within a sentence. The twin of Of in view.
export function of(name) {
  return name.startsWith("effect of ") ? "the " + name : "the coefficient of " + name;
}

// drawn places a row's coverage and two Monte Carlo errors either way, in per cent of the width; null where there is none.
export function drawn(row) {
  if (row.coverage === null) return null;
  const e = 2 * row.coverageError;
  const from = at(shares, Math.max(0, row.coverage - e)), to = at(shares, Math.min(1, row.coverage + e));
  return { x: at(shares, row.coverage), from, width: Math.round((to - from) * 100) / 100 };
}

// drawCoverage fills an svg: the axis, the share promised, what is missing, the dot with its Monte Carlo error.
function drawCoverage(svg, row) {
  const parts = [];
  const line = (cls, x1, x2, y1, y2) => parts.push(node("line", [["class", cls], ["x1", x1 + "%"], ["x2", x2 + "%"], ["y1", y1], ["y2", y2]]));
  const promised = at(shares, nominal);
  line("zero", 2, 98, 21.5, 21.5);
  line("nominal", promised, promised, 0, 22);
  const d = drawn(row);
  if (d) {
    line("short", d.x, promised, 11, 11);
    if (d.width) parts.push(node("rect", [["class", "bar"], ["x", d.from + "%"], ["y", 9.5], ["width", d.width + "%"], ["height", 3]]));
    parts.push(node("circle", [["class", row.hollow ? "hollow" : "dot"], ["cx", d.x + "%"], ["cy", 11], ["r", 5]]));
  }
  svg.replaceChildren(...parts);
}

export function mountTruths(page) {
  const table = document.querySelector("table.truths");
  if (!table) return () => {};
  const { alternatives, simulations } = page.results;
  const names = simulatedNames(alternatives);
  const choose = document.getElementById("truth-of");
  const radios = [...document.querySelectorAll('input[name="truth"]')];
  const rows = [...table.querySelectorAll("tr[data-truth]")];
  const part = (name) => document.querySelector(`#truths [data-f="${name}"]`);
  const sentence = part("truth-text");
  if (choose) choose.addEventListener("change", () => { page.state.truthOf = Number(choose.value); page.update(); page.say(`Showing ${names[page.state.truthOf]}`); });
  for (const r of radios) {
    r.addEventListener("change", () => {
      page.state.truth = Number(r.value);
      page.update();
      page.say(sentence.textContent);
    });
  }
  return () => {
    const truth = simulations.truths[page.state.truth], name = names[page.state.truthOf];
    if (choose) choose.value = page.state.truthOf;
    for (const r of radios) r.checked = Number(r.value) === page.state.truth;
    const value = truthRow(alternatives[0], truth.name, name).true;
    sentence.textContent = `${whole(truth.text)} Then ${of(name)} is in truth ${figure(value, 3)}.`;
    part("truth-name").textContent = of(name);
    for (const tr of rows) {
      const row = truthRow(alternatives[Number(tr.dataset.truth)], truth.name, name);
      const field = (f) => tr.querySelector(`[data-f="${f}"]`);
      drawCoverage(tr.querySelector("svg"), row);
      field("said").textContent = row.said;
      put(field("coverage"), tenth(row.coverage), points(row.coverageError));
      put(field("bias"), figure(row.bias, 3), give(row.biasError));
      put(field("sd"), figure(row.sd, 3), give(row.sdError));
      put(field("rmse"), figure(row.rmse, 3), give(row.rmseError));
      field("wrong").textContent = portion(row.wrongSign);
    }
  };
}

function put(cell, text, beneath) {
  cell.textContent = text;
  if (beneath === "") return;
  const s = document.createElement("small");
  s.textContent = beneath;
  cell.append(s);
}
