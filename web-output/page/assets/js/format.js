// Numbers as text. The twin of Figure in content.go; both are held to the same table in the tests. Reads no data.

export function figure(v, digits) {
  if (v === null || v === undefined || !Number.isFinite(v)) return "–";
  if (v === 0) return "0";
  const s = v.toExponential(digits - 1);
  const e = Number(s.slice(s.indexOf("e") + 1));
  if (e < -5 || e >= 9) {
    let m = s.slice(0, s.indexOf("e"));
    if (m.includes(".")) m = m.replace(/0+$/, "").replace(/\.$/, "");
    return minus(m) + "e" + minus(String(e));
  }
  return minus(Number(s).toFixed(Math.max(0, digits - 1 - e)));
}

export function minus(s) {
  return s.replace("-", "−");
}

// scaled multiplies a number that may be null.
export function scaled(v, by) {
  return v === null || v === undefined || by === null ? null : v * by;
}

// root is the square root of a number that may be null.
export function root(v) {
  return v === null || v === undefined || v < 0 ? null : Math.sqrt(v);
}

// portion says a share in per cent: whole numbers, one decimal near the ends, never 0 or 100 for what is not. The twin of portion in content.go.
export function portion(share) {
  if (share === null || share === undefined) return "–";
  const p = 100 * share;
  if (p <= 0) return "none";
  if (p >= 100) return "all";
  if (p < 0.1) return "under 0.1\u00a0%";
  if (p > 99.9) return "over 99.9\u00a0%";
  if (p < 5 || p > 95) return (Math.floor(10 * p + 0.5) / 10).toFixed(1) + "\u00a0%";
  return Math.floor(p + 0.5).toFixed(0) + "\u00a0%";
}

// tenth says a share in per cent with one decimal. The twin of tenth in truths.go, as are give and points.
export function tenth(share) {
  return share === null || share === undefined ? "–" : (Math.floor(1000 * share + 0.5) / 10).toFixed(1) + "\u00a0%";
}

// give says a Monte Carlo error; nothing where there is none.
export function give(e) {
  return e === null || e === undefined ? "" : "± " + figure(e, 2);
}

// points is give for a share.
export function points(e) {
  return e === null || e === undefined ? "" : "± " + (Math.floor(1000 * e + 0.5) / 10).toFixed(1);
}

// chance says a p-value with three decimals. The twin of chance in kinds.go.
export function chance(p) {
  if (p === null || p === undefined) return "–";
  return p < 0.0005 ? "under 0.001" : (Math.floor(1000 * p + 0.5) / 1000).toFixed(3);
}
