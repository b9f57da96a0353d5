// What the reader chose: one object, mirrored in the address so that a view can be shared. Reads no data.

export function emptyState() {
  return { choice: 0, unit: "raw", kind: 0, truth: 0, truthOf: 0, sort: null, down: false, hidden: [], at: [] };
}

// readState takes a hash apart; whatever is not understood is left at its default. limits: {choices, rungs, kinds, truths, truthsOf, paths:
// [[alternative, length]]}.
export function readState(hash, limits) {
  const s = emptyState();
  const p = new URLSearchParams(hash.replace(/^#/, ""));
  const whole = (v, below) => (/^\d{1,6}$/.test(v || "") && Number(v) < below ? Number(v) : null);
  const c = whole(p.get("c"), limits.choices);
  if (c !== null) s.choice = c;
  if (p.get("u") === "sd") s.unit = "sd";
  for (const [key, name, below] of [["e", "kind", limits.kinds], ["w", "truth", limits.truths], ["v", "truthOf", limits.truthsOf]]) {
    const i = whole(p.get(key), below);
    if (i !== null) s[name] = i;
  }
  const sort = p.get("s");
  if (["estimate", "se", "bias", "root", "out", "diff"].includes(sort)) s.sort = sort;
  s.down = p.get("d") === "1";
  for (const v of (p.get("h") || "").split(".")) {
    const i = whole(v, limits.rungs);
    if (i !== null && !s.hidden.includes(i)) s.hidden.push(i);
  }
  for (const [alternative, length] of limits.paths) {
    const i = whole(p.get("t" + alternative), length);
    if (i !== null) s.at.push([alternative, i]);
  }
  return s;
}

export function writeState(s) {
  const p = new URLSearchParams();
  if (s.choice) p.set("c", s.choice);
  if (s.unit !== "raw") p.set("u", s.unit);
  if (s.kind) p.set("e", s.kind);
  if (s.truth) p.set("w", s.truth);
  if (s.truthOf) p.set("v", s.truthOf);
  if (s.sort) p.set("s", s.sort);
  if (s.down) p.set("d", "1");
  if (s.hidden.length) p.set("h", [...s.hidden].sort((a, b) => a - b).join("."));
  for (const [alternative, i] of s.at) p.set("t" + alternative, i);
  return p.toString();
}

// position returns the slider position of an alternative, or null where it stands at the chosen value.
export function position(s, alternative) {
  for (const [a, i] of s.at) if (a === alternative) return i;
  return null;
}

export function setPosition(s, alternative, i) {
  s.at = s.at.filter(([a]) => a !== alternative);
  if (i !== null) s.at.push([alternative, i]);
}
