/** The nearest known name to a misspelt one, for messages. */

/**
 * Of the known names the one nearest to `name`, or null if none is near enough to be meant.
 *
 * Distance: insertions, deletions, substitutions and swaps of neighbours count 1 each (optimal
 * string alignment); case counts nothing. "Near enough" is at most a third of the longer name,
 * but at least 1; a name's beginning of three letters or more is near enough, too. The first of several equally near names is taken.
 */
export function nearestName(name: string, known: readonly string[]): string | null {
  const wanted = name.toLowerCase();
  let best: string | null = null;
  let bestDistance = Infinity;
  for (const candidate of known) {
    const distance = editDistance(wanted, candidate.toLowerCase());
    const limit = Math.max(1, Math.floor(Math.max(name.length, candidate.length) / 3));
    const begins = name.length >= 3 && candidate.toLowerCase().startsWith(wanted);
    if ((distance <= limit || begins) && distance < bestDistance) {
      best = candidate;
      bestDistance = distance;
    }
  }
  return best;
}

/**
 * Optimal string alignment distance of two strings, in UTF-16 code units.
 * Source: Damerau (1964), Communications of the ACM 7, 171; Levenshtein (1966), Soviet Physics
 * Doklady 10, 707; the recurrence of Wagner & Fischer (1974), Journal of the ACM 21, 168.
 */
export function editDistance(a: string, b: string): number {
  let beforeLast: number[] = [];
  let last = Array.from({ length: b.length + 1 }, (_, j) => j);
  for (let i = 1; i <= a.length; i++) {
    const row = [i];
    for (let j = 1; j <= b.length; j++) {
      const same = a[i - 1] === b[j - 1];
      let distance = Math.min(row[j - 1] + 1, last[j] + 1, last[j - 1] + (same ? 0 : 1));
      if (i > 1 && j > 1 && a[i - 1] === b[j - 2] && a[i - 2] === b[j - 1]) {
        distance = Math.min(distance, beforeLast[j - 2] + 1);
      }
      row.push(distance);
    }
    beforeLast = last;
    last = row;
  }
  return last[b.length];
}
