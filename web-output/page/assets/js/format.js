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
