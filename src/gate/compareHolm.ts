/**
 * Probabilities corrected for their number, in the order given.
 * Source: Holm 1979, Scand. J. Statist. 6, 65.
 */
export function holm(p: readonly number[]): number[] {
  const order = p.map((_, k) => k).sort((a, b) => p[a] - p[b]);
  const adjusted = new Array<number>(p.length);
  let most = 0;
  order.forEach((k, rank) => {
    most = Math.max(most, Math.min(1, (p.length - rank) * p[k]));
    adjusted[k] = most;
  });
  return adjusted;
}
