/**
 * A running sum that carries the rounding error of every addition along.
 * Source: Neumaier (1974), Z. Angew. Math. Mech. 54, 39: unlike Kahan's, it also keeps the digits of
 * a sum that is smaller than the next term.
 */
export class CompensatedSum {
  private sum = 0;
  private lost = 0;

  add(term: number): void {
    const t = this.sum + term;
    this.lost += Math.abs(this.sum) >= Math.abs(term) ? this.sum - t + term : term - t + this.sum;
    this.sum = t;
  }

  value(): number {
    return this.sum + this.lost;
  }
}

/** Compensated sum of a list of numbers, in its order. */
export function compensatedSum(values: ArrayLike<number>): number {
  const sum = new CompensatedSum();
  for (let i = 0; i < values.length; i++) sum.add(values[i]);
  return sum.value();
}
