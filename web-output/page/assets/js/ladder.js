// The ladder: one rung an alternative for the chosen coefficient. Reads view.Results.alternatives and the page's choices.
import { figure, portion, scaled, root } from "./format.js";
import { newAxis, drawTicks, drawInterval, stretch } from "./interval.js";
import { position } from "./state.js";
import { inKind, kindsOf, kindLines } from "./kinds.js";

// coefficientOf finds the chosen coefficient in an alternative: {place, value} or null. Names are compared, never used as keys.
export function coefficientOf(alternative, choice) {
  const list = choice.derived ? alternative.derived : alternative.coefficients;
  for (let i = 0; i < list.length; i++) if (list[i].name === choice.name) return { place: i, value: list[i] };
  return null;
}

// unitOf is the factor that takes a coefficient to the chosen unit; null where it has no standard deviation.
export function unitOf(choice, unit) {
  return unit === "sd" ? choice.sd : 1;
}

// inUnits states a coefficient in the chosen unit.
export function inUnits(c, by) {
  return {
    estimate: scaled(c.estimate, by), se: scaled(c.standardError, by), low: scaled(c.low, by), high: scaled(c.high, by),
    bias: scaled(c.estimatedBias, by), root: scaled(root(c.estimatedMSE), by), status: c.status,
    posterior: scaled(c.posteriorSD, by), again: againIn(c.resampled, by),
  };
}

// againIn states what was resampled in the chosen unit; null where nothing was, or where there is no unit.
function againIn(k, by) {
  if (!k || by === null) return null;
  return {
    se: scaled(k.standardError, by), low: scaled(k.low, by), high: scaled(k.high, by), correctedLow: scaled(k.biasCorrected.low, by), correctedHigh: scaled(k.biasCorrected.high, by),
    positive: k.sharePositive, negative: k.shareNegative, used: k.used,
  };
}

// told says what repeating the whole procedure gave for one coefficient. The twin of told in content.go.
export function told(k, estimate, run) {
  if (!k || estimate === null || run.count === 0) return "";
  let s = `Repeated ${run.count} times on resampled ${run.drawn}: `;
  if (k.used === 0) return s + "the coefficient never had a value of its own.";
  if (k.low === null || k.high === null) s += "too few values for limits";
  else {
    s += `the middle 95\u00a0% of the estimates lie between ${figure(k.low, 3)} and ${figure(k.high, 3)}`;
    if (k.correctedLow === null || k.correctedHigh === null) s += " (bias-corrected and accelerated limits cannot be formed)";
    else s += ` (bias-corrected and accelerated: ${figure(k.correctedLow, 3)} to ${figure(k.correctedHigh, 3)})`;
  }
  if (k.positive !== null && k.negative !== null) {
    const [sign, share] = k.negative > k.positive ? ["negative", k.negative] : ["positive", k.positive];
    s += `; ${portion(share)} are ${sign}`;
    const zero = 1 - k.positive - k.negative;
    if (zero > 5e-6) s += `, ${portion(zero)} zero`;
    if ((estimate > 0 && sign === "negative") || (estimate < 0 && sign === "positive" && share > 0)) s += `, though the estimate itself is ${estimate > 0 ? "positive" : "negative"}`;
  }
  s += ".";
  const left = run.count - k.used;
  if (left > 0) s += ` In ${left} of the ${run.count} it had no value of its own.`;
  return s;
}

// posterior is the twin of posterior in content.go.
export function posterior(d) {
  return d === null || d === undefined ? "" : `Where this alternative is read as a prior, the posterior standard deviation is ${figure(d, 3)}.`;
}

// beyond says how far a cut line goes, or nothing.
export function beyond(axis, again) {
  const cut = stretch(axis, again);
  if (!cut) return "";
  const ends = [];
  if (cut.cutLow) ends.push(`to ${figure(again.low, 3)}`);
  if (cut.cutHigh) ends.push(`to ${figure(again.high, 3)}`);
  return ends.length ? "the thin line goes on " + ends.join(" and ") : "";
}

// atPoint states one step of a path as a rung: the interval keeps the alternative's own factor between standard error and half width.
export function atPoint(alternative, choice, i, by) {
  const found = coefficientOf(alternative, choice);
  if (!found) return null;
  const point = alternative.tuning.path[i];
  const list = choice.derived ? point.derived : point.coefficients;
  if (found.place >= list.length) return null;
  const c = list[found.place];
  const t = quantileOf(alternative);
  const half = c.standardError === null || t === null ? null : t * c.standardError;
  return inUnits({
    estimate: c.estimate, standardError: c.standardError, low: half === null ? null : c.estimate - half, high: half === null ? null : c.estimate + half,
    estimatedBias: c.estimatedBias, estimatedMSE: c.estimatedMSE, posteriorSD: null, resampled: null, status: "your choice",
  }, by);
}

export function quantileOf(alternative) {
  for (const c of [...alternative.coefficients, ...alternative.derived]) {
    if (c.standardError > 0 && c.low !== null && c.high !== null) return (c.high - c.low) / 2 / c.standardError;
  }
  return null;
}

// order returns the places of the rungs in the chosen order; rungs without a number come last.
export function order(rows, key, down) {
  const places = rows.map((_, i) => i);
  if (!key) return places;
  const value = (i) => (rows[i] === null || rows[i][key] === null || rows[i][key] === undefined ? null : rows[i][key]);
  return places.sort((a, b) => {
    const x = value(a), y = value(b);
    if (x === null || y === null) return (x === null) - (y === null) || a - b;
    return (down ? y - x : x - y) || a - b;
  });
}

const statusText = [["zero", "set to zero"], ["not identified", "not identified"], ["different quantity", "a different quantity"]];

export function mountLadder(page) {
  const table = document.querySelector("table.ladder");
  if (!table) return () => {};
  const { results, choices } = page;
  const bodies = [...table.querySelectorAll("tbody.rung")];
  const ticks = table.querySelector("svg.ticks");
  sortButtons(page, table);
  for (const a of results.alternatives.keys()) {
    if (results.alternatives[a].tuning && results.alternatives[a].tuning.path.length > 1) bodies.push(yourBody(table, results.alternatives[a], a));
  }
  return () => {
    const choice = choices[page.state.choice];
    const by = unitOf(choice, page.state.unit);
    const rows = bodies.map((body) => rowOf(page, body, choice, by));
    const band = rows[0];
    const seen = rows.filter((r, i) => r && !bodies[i].hidden);
    const axis = newAxis(seen.flatMap((r) => [r.estimate, r.low, r.high]), seen.flatMap((r) => (r.again ? [r.again.low, r.again.high] : [])));
    drawTicks(ticks, axis);
    for (const n of document.querySelectorAll("[data-shown]")) n.textContent = choice.name;
    bodies.forEach((body, i) => fill(page, body, rows[i], band, axis, choice));
    for (const i of order(rows, page.state.sort, page.state.down)) table.append(bodies[i]);
    for (const th of table.querySelectorAll("th[data-sort]")) {
      th.setAttribute("aria-sort", th.dataset.sort === page.state.sort ? (page.state.down ? "descending" : "ascending") : "none");
    }
  };
}

function rowOf(page, body, choice, by) {
  const { results, state } = page;
  const a = Number(body.dataset.rung);
  const alternative = results.alternatives[a];
  if (body.classList.contains("yours")) {
    const i = position(state, a);
    body.hidden = i === null || i === alternative.tuning.chosen || state.hidden.includes(a);
    if (body.hidden) return null;
    const row = atPoint(alternative, choice, i, by);
    if (!row) return null;
    row.out = root(alternative.tuning.path[i].error);
    row.diff = null;
    row.step = i;
    if (state.kind !== 0) {
      row.se = row.low = row.high = null;
      row.missing = `no ${results.run.standardErrors[state.kind].kind} standard error along the path`;
    }
    return row;
  }
  body.hidden = state.hidden.includes(a);
  const found = coefficientOf(alternative, choice);
  const errors = page.errors[a];
  const own = found ? kindsOf(errors, choice.derived, found.place) : null;
  const row = found ? inUnits(inKind(found.value, errors, own, state.kind), by) : { estimate: null, se: null, low: null, high: null, bias: null, root: null, posterior: null, again: null, status: "absent" };
  if (own && own.se[state.kind] === null && errors.reasons[state.kind] !== "") row.missing = `no ${results.run.standardErrors[state.kind].kind} standard error`;
  row.kinds = found ? kindLines(results.run.standardErrors, errors, own, found.value.estimate, by) : [];
  row.out = alternative.outOfSample.rmse;
  row.diff = alternative.outOfSample.difference.estimate;
  if (row.status === "different quantity") row.bias = row.root = null;
  return row;
}

function fill(page, body, row, band, axis, choice) {
  if (!row) return;
  const field = (name) => body.querySelector(`[data-f="${name}"]`);
  const hollow = row.status === "different quantity";
  drawInterval(field("axis").querySelector("svg"), axis, band, row.status === "not identified" ? null : row, hollow);
  let said = row.status === "absent" ? "no such coefficient" : "";
  for (const [status, text] of statusText) if (row.status === status) said = text;
  if (row.estimate === null && page.state.unit === "sd" && choice.sd === null) said = "no standard deviation of its own";
  field("said").textContent = [said, row.missing, beyond(axis, row.again)].filter((t) => t).join("; ");
  field("estimate").textContent = figure(row.estimate, 3);
  const se = field("se");
  se.textContent = figure(row.se, 3);
  if (row.se !== null && band && band.se > 0) small(se, "× " + figure(row.se / band.se, 3));
  if (row.again && row.again.se !== null) small(se, "resampled " + figure(row.again.se, 3));
  field("bias").textContent = figure(row.bias, 3);
  field("root").textContent = figure(row.root, 3);
  const a = page.results.alternatives[Number(body.dataset.rung)];
  if (body.classList.contains("yours")) {
    const point = a.tuning.path[row.step];
    body.querySelector(".label").textContent = `Your choice: ${a.label}, ${a.tuning.parameter} ${figure(point.value, 3)}`;
    field("meaning").textContent = `${figure(point.effectiveDegrees, 3)} effective degrees of freedom; chosen by hand after looking`;
    field("out").textContent = figure(row.out, 4);
    small(field("out"), "not nested");
    return;
  }
  let meaning = "";
  for (const m of a.meaning) if (m.coefficient === choice.name) meaning = m.text;
  field("meaning").textContent = meaning;
  const kinds = field("kinds");
  kinds.replaceChildren(...row.kinds.map(([name, text]) => line(name, text)));
  kinds.hidden = row.kinds.length === 0;
  tell(field("told"), told(row.again, row.estimate, page.results.run.resampling));
  tell(field("prior"), posterior(row.posterior));
}

function tell(p, text) {
  p.textContent = text;
  p.hidden = text === "";
}

// line is a point of a list with its name set off.
function line(name, text) {
  const li = document.createElement("li"), strong = document.createElement("strong");
  strong.textContent = name;
  li.append(strong, ": " + text);
  return li;
}

function small(cell, text) {
  const s = document.createElement("small");
  s.textContent = text;
  cell.append(s);
}

// yourBody makes the rung that a slider fills.
function yourBody(table, alternative, a) {
  const first = table.querySelector("tbody.rung");
  const body = first.cloneNode(true);
  body.className = "rung yours";
  body.dataset.rung = a;
  body.hidden = true;
  body.querySelector(".more").remove();
  const cells = body.querySelectorAll("td.n");
  cells[4].dataset.f = "out";
  cells[5].textContent = "–";
  table.append(body);
  return body;
}

function sortButtons(page, table) {
  for (const th of table.querySelectorAll("th[data-sort]")) {
    const b = document.createElement("button");
    b.type = "button";
    b.textContent = th.textContent;
    th.replaceChildren(b);
    b.addEventListener("click", () => {
      const s = page.state, key = th.dataset.sort;
      if (s.sort !== key) [s.sort, s.down] = [key, false];
      else if (!s.down) s.down = true;
      else [s.sort, s.down] = [null, false];
      page.say(s.sort ? `Sorted by ${b.textContent}, ${s.down ? "largest" : "smallest"} first` : "In the listed order");
      page.update();
    });
  }
}
