// Starts the page: reads the data block, mounts the modules, keeps state and address together.
import { readState, writeState, emptyState } from "./state.js";
import { unpackPaths } from "./paths.js";
import { mountKinds } from "./kinds.js";
import { mountLadder } from "./ladder.js";
import { mountMatrix } from "./matrix.js";
import { mountTuning } from "./tuning.js";
import { mountTruths, simulatedNames } from "./truths.js";
import { mountCharts } from "./charts.js";
import { mountCopy } from "./copy.js";

function start() {
  const data = JSON.parse(document.getElementById("view").textContent);
  unpackPaths(data.results.alternatives, data.paths);
  const page = { results: data.results, choices: data.choices, charts_: data.charts, errors: data.errors, state: emptyState() };
  const limits = {
    choices: page.choices.length, rungs: page.results.alternatives.length, kinds: page.results.run.standardErrors.length,
    truths: page.results.simulations.truths.length, truthsOf: simulatedNames(page.results.alternatives).length,
    paths: [...page.results.alternatives.entries()].filter(([, a]) => a.tuning).map(([i, a]) => [i, a.tuning.path.length]),
  };
  const anchors = [...document.querySelectorAll("nav a")].map((a) => a.getAttribute("href"));
  const fromAddress = () => (anchors.includes(location.hash) || location.hash === "" ? null : readState(location.hash, limits));
  page.state = fromAddress() || emptyState();
  const live = document.getElementById("live");
  page.say = (text) => { live.textContent = text; };
  document.documentElement.dataset.ready = "0"; // shows what needs script, so that charts have a width
  page.charts = mountCharts(page);
  const parts = [mountKinds(page), mountLadder(page), mountMatrix(page), mountTuning(page), mountTruths(page)];
  const controls = mountControls(page);
  page.refresh = () => {
    controls();
    for (const part of parts) part();
  };
  page.update = () => {
    const hash = writeState(page.state);
    history.replaceState(null, "", hash ? "#" + hash : location.pathname + location.search);
    page.refresh();
  };
  addEventListener("hashchange", () => {
    const s = fromAddress();
    if (s) {
      page.state = s;
      page.refresh();
    }
  });
  mountCopy(page);
  page.refresh();
  document.documentElement.dataset.ready = "1";
}

function mountControls(page) {
  const choose = document.getElementById("choose");
  if (!choose) return () => {};
  const units = [...document.querySelectorAll('input[name="unit"]')];
  const boxes = [...document.querySelectorAll("input[data-rung]")];
  choose.addEventListener("change", () => {
    page.state.choice = Number(choose.value);
    page.update();
    page.charts.highlight();
    page.say(`Showing ${page.choices[page.state.choice].name}`);
  });
  for (const u of units) u.addEventListener("change", () => { page.state.unit = u.value; page.update(); });
  for (const b of boxes) {
    b.addEventListener("change", () => {
      const i = Number(b.dataset.rung);
      page.state.hidden = page.state.hidden.filter((h) => h !== i);
      if (!b.checked) page.state.hidden.push(i);
      page.update();
    });
  }
  document.getElementById("all").addEventListener("click", () => { page.state.hidden = []; page.update(); });
  return () => {
    choose.value = page.state.choice;
    for (const u of units) u.checked = u.value === page.state.unit;
    for (const b of boxes) b.checked = !page.state.hidden.includes(Number(b.dataset.rung));
  };
}

start();
