// Every coefficient under every remedy, in the chosen unit and with the chosen kind of standard error. Reads view.Results.alternatives and diagnosis.regressors.
import { figure, scaled } from "./format.js";
import { inKind, kindsOf } from "./kinds.js";

export function mountMatrix(page) {
  const cells = [...document.querySelectorAll("table.matrix td[data-a]")];
  const { results } = page;
  let shown = "raw", kind = 0;
  return () => {
    if (page.state.unit === shown && page.state.kind === kind) return;
    shown = page.state.unit;
    kind = page.state.kind;
    for (const cell of cells) {
      const a = Number(cell.dataset.a), i = Number(cell.dataset.c);
      const c = inKind(results.alternatives[a].coefficients[i], page.errors[a], kindsOf(page.errors[a], false, i), kind);
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
