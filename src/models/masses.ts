/** Masses of the bodies of a model: all equal, or drawn from a power law. */
import { UsageError } from '../errors.ts';
import type { Random } from '../numerics/random.ts';
import type { FloatColumn } from '../snapshot/particles.ts';

/** Exponent of dN/dm ∝ m^−2.35. Source: Salpeter 1955, ApJ 121, 161. */
export const SALPETER_SLOPE = 2.35;

export interface MassFunction {
  readonly slope: number;
  /** Least and greatest mass in any unit: only their ratio matters, as the sum is normalised. */
  readonly range: readonly [number, number];
}

/** Fills entries `begin` … `end − 1` with masses of the power law, in the unit of its range. */
export function drawMasses(
  law: MassFunction,
  random: Random,
  mass: Float64Array,
  begin: number,
  end: number,
): void {
  const exponent = 1 - law.slope;
  const [least, greatest] = law.range;
  const atLeast = least ** exponent;
  const span = greatest ** exponent - atLeast;
  for (let i = begin; i < end; i++) mass[i] = (atLeast + span * random.uniform()) ** (1 / exponent);
}

/** Writes `drawn`, scaled so that it adds up to `total`, into `mass`. */
export function normaliseMasses(drawn: Float64Array, total: number, mass: FloatColumn): void {
  let sum = 0;
  for (let i = 0; i < drawn.length; i++) sum += drawn[i];
  const scale = total / sum;
  for (let i = 0; i < drawn.length; i++) mass[i] = drawn[i] * scale;
}

/** @throws UsageError `usage.massRange` unless 0 < least < greatest, both finite */
export function requireMassRange(range: readonly [number, number]): void {
  const [least, greatest] = range;
  if (!(least > 0 && greatest > least && Number.isFinite(greatest))) {
    throw new UsageError(
      'usage.massRange',
      `The range of masses is ${least} to ${greatest}, but must begin above 0 and end above its beginning.`,
      'Give two positive numbers, the smaller first, such as 0.1 and 10.',
    );
  }
}
