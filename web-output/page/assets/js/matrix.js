// Every coefficient under every remedy, in the chosen unit. Reads view.Results.alternatives and diagnosis.regressors.
import { figure, scaled } from "./format.js";

export function mountMatrix(page) {
  const cells = [...document.querySelectorAll("table.matrix td[data-a]")];
  const { results } = page;
  let shown = "raw";
  return () => {
    if (page.state.unit === shown) return;
    shown = page.state.unit;
    for (const cell of cells) {
      const c = results.alternatives[Number(cell.dataset.a)].coefficients[Number(cell.dataset.c)];
      if (c.status === "zero" || c.status === "not identified") continue;
      let by = 1;
      if (shown === "sd") {
        by = null;
        for (const g of results.diagnosis.regressors) if (g.name === c.name) by = g.sd;
      }
      cell.textContent = figure(scaled(c.estimate, by), 3);
      const lines = [figure(scaled(c.standardError, by), 3)];
      if (c.status === "different quantity") lines.push("different quantity");
      for (const text of lines) {
        const s = document.createElement("small");
        s.textContent = text;
        cell.append(s);
      }
    }
  };
}
