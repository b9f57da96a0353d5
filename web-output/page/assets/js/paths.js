// The paths of the tunings come packed: for each step four numbers a coefficient, in a fixed order, without their names.
const named = ([estimate, standardError, estimatedBias, estimatedMSE]) => ({ estimate, standardError, estimatedBias, estimatedMSE });

// Puts the packed steps, by place of the alternative, back into the alternatives.
export function unpackPaths(alternatives, paths) {
  for (const [i, steps] of Object.entries(paths)) {
    alternatives[i].tuning.path.forEach((point, k) => {
      point.coefficients = steps[k][0].map(named);
      point.derived = steps[k][1].map(named);
    });
  }
  return alternatives;
}
