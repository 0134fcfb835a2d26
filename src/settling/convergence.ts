/** How far in a run is relaxed by the noise of its own bodies. */
import type { MeasureRecord } from '../dynamics/record.ts';
import { radiiOf, type SetName } from './series.ts';

/** Share of the span that the local relaxation time must exceed. Source: Power et al. 2003, MNRAS 338, 14. */
export const CONVERGED = 0.6;

/**
 * Relaxation time inside a radius, N/(8 ln N) times the period of a circular orbit there, N the bodies
 * inside. Source: Power et al. 2003, MNRAS 338, 14, eq. 20 (with Binney & Tremaine); over the period
 * at a mean density of 200 times the critical one it is √200/8 N/ln N (ρ̄/ρ_crit)^−½.
 * @param mass - inside the radius
 */
export function relaxationInside(
  bodies: number,
  mass: number,
  radius: number,
  gravity: number,
): number {
  const period = 2 * Math.PI * Math.sqrt(radius ** 3 / (gravity * mass));
  return (bodies / (8 * Math.log(bodies))) * period;
}

/**
 * The convergence radius: inside it the relaxation time is less than 0.6 of the span. Between Lagrangian
 * radii by a straight line in logarithms. Null if it lies inside the innermost of them, or outside the
 * outermost, where the bodies are too few to say.
 */
export function convergenceRadius(
  record: MeasureRecord,
  set: SetName,
  span: number,
): { readonly radius: number | null; readonly isThroughout: boolean } {
  const { fractions, radii } = radiiOf(record, set);
  const { mass } = set === 'bound' ? record.bound : record.whole;
  const gravity = record.settings.gravity.value;
  const share = mass / record.whole.mass;
  const points = fractions.flatMap((fraction, k) => {
    const radius = radii[k];
    const bodies = fraction * share * record.effectiveNumber;
    if (radius === null || radius === undefined || !(radius > 0) || !(bodies > Math.E)) return [];
    const time = relaxationInside(bodies, fraction * mass, radius, gravity);
    return [{ radius: Math.log(radius), excess: Math.log(time / (CONVERGED * span)) }];
  });
  const first = points.findIndex(({ excess }) => excess >= 0);
  if (points.length === 0 || first === 0) return { radius: null, isThroughout: false };
  if (first < 0) return { radius: null, isThroughout: true };
  const [a, b] = [points[first - 1], points[first]];
  const part = -a.excess / (b.excess - a.excess);
  return { radius: Math.exp(a.radius + part * (b.radius - a.radius)), isThroughout: false };
}
