// Sliders over the penalty and the number of components. Reads alternatives[].tuning.
import { figure, root } from "./format.js";
import { position, setPosition } from "./state.js";

export function mountTuning(page) {
  const { results } = page;
  const parts = [];
  for (const slider of document.querySelectorAll("[data-slider]")) {
    const a = Number(slider.dataset.slider);
    const t = results.alternatives[a].tuning;
    const out = document.querySelector(`[data-out="${a}"]`);
    parts.push({ slider, a, t, out });
    slider.addEventListener("input", () => {
      const i = Number(slider.value);
      setPosition(page.state, a, i === t.chosen ? null : i);
      page.update();
    });
    document.querySelector(`[data-reset="${a}"]`).addEventListener("click", () => {
      setPosition(page.state, a, null);
      page.update();
      page.say("Back to the chosen value");
    });
  }
  return () => {
    for (const { slider, a, t, out } of parts) {
      const moved = position(page.state, a);
      const i = moved === null ? t.chosen : moved;
      slider.value = i;
      const text = describe(t, i);
      out.textContent = text;
      slider.setAttribute("aria-valuetext", text);
      page.charts.cursor(a, t.path[i].value);
    }
  };
}

// describe says what one step of a path gives.
export function describe(t, i) {
  const p = t.path[i];
  const value = t.parameter === "penalty" ? (p.value === 0 ? "0 (least squares)" : figure(p.value, 3)) : `${p.value} of ${t.path.length - 1}`;
  const error = p.error === null ? "" : `; cross-validated error ${figure(root(p.error), 4)}`;
  const degrees = p.effectiveDegrees === null ? "" : `; ${figure(p.effectiveDegrees, 3)} effective degrees of freedom`;
  return `${value}${degrees}${error}${i === t.chosen ? "; the chosen value" : ""}`;
}
