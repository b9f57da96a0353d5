// The kind of standard error that is shown. Reads the page's errors: six digits of every kind, in the order of run.standardErrors.
import { figure, chance, scaled } from "./format.js";

// kindsOf finds the standard errors of one coefficient: {se, p}, a list of each; null where it has none.
export function kindsOf(errors, derived, place) {
  const own = (derived ? errors.derived : errors.coefficients)[place];
  return own && own.se.length ? own : null;
}

// inKind states a coefficient with another kind of standard error; kind 0 is what it holds already.
export function inKind(c, errors, own, kind) {
  if (kind === 0 || !own) return c;
  const se = own.se[kind];
  const half = se === null || c.estimate === null ? null : errors.t[kind] * se;
  return { ...c, standardError: se, low: half === null ? null : c.estimate - half, high: half === null ? null : c.estimate + half };
}

// kindLines says every kind of one coefficient, in the chosen unit. The twin of kindLines in kinds.go.
export function kindLines(kinds, errors, own, estimate, by) {
  if (!own) return [];
  return own.se.map((se, k) => {
    if (se === null && errors.reasons[k] !== "") return [kinds[k].kind, "none: " + errors.reasons[k]];
    if (se === null || estimate === null || by === null) return [kinds[k].kind, "none"];
    const half = errors.t[k] * se;
    const degrees = Math.floor(10 * errors.degrees[k] + 0.5) / 10;
    return [kinds[k].kind, `standard error ${figure(scaled(se, by), 3)}, t-ratio ${figure(estimate / se, 3)} with ${degrees} degrees of freedom, p-value ${chance(own.p[k])}, ` +
      `interval ${figure(scaled(estimate - half, by), 3)} to ${figure(scaled(estimate + half, by), 3)}`];
  });
}

// mountKinds says which kind is shown, how it is formed and what to hold against it.
export function mountKinds(page) {
  const kinds = page.results.run.standardErrors;
  const text = document.querySelector('[data-f="kind-text"]');
  if (!text) return () => {};
  const warning = document.querySelector('[data-f="kind-warning"]');
  const radios = [...document.querySelectorAll('input[name="kind"]')];
  for (const r of radios) {
    r.addEventListener("change", () => {
      page.state.kind = Number(r.value);
      page.update();
      page.say(`Standard errors: ${kinds[page.state.kind].kind}`);
    });
  }
  return () => {
    const k = kinds[page.state.kind];
    text.textContent = whole(k.text);
    warning.textContent = k.warning ? whole(k.warning) : "";
    warning.hidden = !k.warning;
    for (const n of document.querySelectorAll("[data-kind]")) n.textContent = k.kind;
    for (const r of radios) r.checked = Number(r.value) === page.state.kind;
  };
}

// whole makes a sentence of a text.
export function whole(text) {
  const [first, ...rest] = text;
  return first.toUpperCase() + rest.join("") + ".";
}
