/** Principal components of runs, by power iteration on the small matrix of their products. */

/** Share of the variance that the components kept hold together. */
const KEPT = 0.95;

/**
 * Scores of the runs on the leading principal components of them all.
 * @param rows - one row of features a run, each of unit scatter
 * @returns one column a component, a score a run; no more than a third of the number of runs
 */
export function principalScores(rows: readonly Float64Array[]): Float64Array[] {
  const n = rows.length;
  const features = rows[0].length;
  const mean = Float64Array.from({ length: features }, (_, f) =>
    rows.reduce((sum, row) => sum + row[f] / n, 0),
  );
  const products = rows.map((p) =>
    Float64Array.from(rows, (q) =>
      p.reduce((sum, v, f) => sum + (v - mean[f]) * (q[f] - mean[f]), 0),
    ),
  );
  const total = products.reduce((sum, row, k) => sum + row[k], 0);
  const scores: Float64Array[] = [];
  let held = 0;
  while (total > 0 && held < KEPT * total && scores.length < Math.max(1, Math.floor(n / 3))) {
    // Any start will do that no component is at right angles to.
    let vector = Float64Array.from({ length: n }, (_, k) => Math.sin(1 + k * 1.7));
    let value = 0;
    for (let step = 0; step < 200; step++) {
      const next = products.map((row) => row.reduce((sum, v, k) => sum + v * vector[k], 0));
      const before = value;
      value = Math.hypot(...next);
      if (!(value > 1e-12 * total)) return scores;
      vector = Float64Array.from(next, (v) => v / value);
      if (Math.abs(value - before) < 1e-10 * value) break;
    }
    scores.push(vector.map((v) => v * Math.sqrt(value)));
    for (let i = 0; i < n; i++) {
      for (let j = 0; j < n; j++) products[i][j] -= value * vector[i] * vector[j];
    }
    held += value;
  }
  return scores;
}
