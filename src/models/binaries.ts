/**
 * Binaries: two bodies on a Kepler orbit about a centre that moves like a single body of the model.
 *
 * ln a is uniform in a range, the eccentricity thermal, dn = 2e de (Jeans 1919, MNRAS 79, 408; Heggie
 * 1975, MNRAS 173, 729), orientation and phase without preference.
 */
import { UsageError } from '../errors.ts';
import type { Random } from '../numerics/random.ts';
import { optionName } from './options.ts';
import type { BodyView } from './sampling.ts';

/** Position and velocity of one member from the other. */
export interface RelativeOrbit {
  readonly position: Float64Array;
  readonly velocity: Float64Array;
}

/**
 * Eccentric anomaly E with E − e sin E = M, for 0 ≤ e < 1 and any M of one turn, by Newton's iteration
 * inside a bracket that shrinks.
 */
export function eccentricAnomaly(meanAnomaly: number, eccentricity: number): number {
  // Between M − e and M + e, and within half a turn on the side of M.
  let low = meanAnomaly - eccentricity;
  let high = meanAnomaly + eccentricity;
  let anomaly = meanAnomaly + 0.85 * eccentricity * Math.sign(Math.sin(meanAnomaly));
  for (let round = 0; round < 60; round++) {
    const miss = anomaly - eccentricity * Math.sin(anomaly) - meanAnomaly;
    if (miss > 0) high = anomaly;
    else low = anomaly;
    let next = anomaly - miss / (1 - eccentricity * Math.cos(anomaly));
    if (!(next >= low && next <= high)) next = (low + high) / 2;
    if (next === anomaly) break;
    anomaly = next;
  }
  return anomaly;
}

/** Draws an orbit of total mass `gm` = G (m₁ + m₂) into `orbit`. */
export function drawOrbit(
  gm: number,
  [least, greatest]: readonly [number, number],
  random: Random,
  orbit: RelativeOrbit,
): void {
  const semiMajorAxis = least * Math.exp(Math.log(greatest / least) * random.uniform());
  const e = Math.sqrt(random.uniform());
  const anomaly = eccentricAnomaly(2 * Math.PI * random.uniform(), e);
  const minor = Math.sqrt((1 - e) * (1 + e));
  const [sine, cosine] = [Math.sin(anomaly), Math.cos(anomaly)];
  const distance = semiMajorAxis * (1 - e * cosine);
  const speed = Math.sqrt(gm * semiMajorAxis) / distance;
  // Along the pericentre, and in the plane a right angle further.
  const [px, py] = [semiMajorAxis * (cosine - e), semiMajorAxis * minor * sine];
  const [ux, uy] = [-speed * sine, speed * minor * cosine];
  const along = new Float64Array(3);
  const across = new Float64Array(3);
  drawFrame(random, along, across);
  for (let k = 0; k < 3; k++) {
    orbit.position[k] = px * along[k] + py * across[k];
    orbit.velocity[k] = ux * along[k] + uy * across[k];
  }
}

/** Two unit vectors at right angles, without preference. */
function drawFrame(random: Random, along: Float64Array, across: Float64Array): void {
  random.unitVector(along);
  for (;;) {
    random.unitVector(across);
    const product = along[0] * across[0] + along[1] * across[1] + along[2] * across[2];
    const square = 1 - product * product;
    if (square < 1e-6) continue; // Nearly parallel: the direction of the rest would be rounding.
    const length = Math.sqrt(square);
    for (let k = 0; k < 3; k++) across[k] = (across[k] - product * along[k]) / length;
    return;
  }
}

/** A separation that is rounded by more than this share is refused. */
const MOST_ROUNDING = 1e-3;

/**
 * Splits centres into pairs, in place: the centre of pair j stands at `pairs` + j, its members go to 2j
 * and 2j + 1, whose masses stand there already.
 * @param reach - distance from the origin that is added to the bodies later [length]
 * @throws UsageError `usage.modelOption` if the columns cannot resolve a pair
 */
export function splitPairs(
  bodies: BodyView,
  pairs: number,
  settings: {
    readonly gravity: number;
    readonly semiMajorAxis: readonly [number, number];
    readonly reach: number;
    readonly mantissaBits: number;
    readonly owner: string;
  },
  random: Random,
): void {
  const { mass, x, y, z, vx, vy, vz } = bodies;
  const orbit = { position: new Float64Array(3), velocity: new Float64Array(3) };
  const { position, velocity } = orbit;
  const unit = 2 ** -settings.mantissaBits;
  for (let j = 0; j < pairs; j++) {
    const [centre, a, b] = [pairs + j, 2 * j, 2 * j + 1];
    const sum = mass[a] + mass[b];
    drawOrbit(settings.gravity * sum, settings.semiMajorAxis, random, orbit);
    const far = Math.max(Math.abs(x[centre]), Math.abs(y[centre]), Math.abs(z[centre]));
    if ((far + settings.reach) * unit > MOST_ROUNDING * Math.hypot(...position)) {
      throw unresolved(settings.owner, Math.hypot(...position), far + settings.reach);
    }
    const [shareA, shareB] = [mass[b] / sum, mass[a] / sum];
    // Both members of the last pair may stand where its centre does: read it before writing.
    const place = [x[centre], y[centre], z[centre]];
    const motion = [vx[centre], vy[centre], vz[centre]];
    [x, y, z].forEach((column, k) => {
      column[a] = place[k] - shareA * position[k];
      column[b] = place[k] + shareB * position[k];
    });
    [vx, vy, vz].forEach((column, k) => {
      column[a] = motion[k] - shareA * velocity[k];
      column[b] = motion[k] + shareB * velocity[k];
    });
  }
}

function unresolved(owner: string, separation: number, far: number): UsageError {
  return new UsageError(
    'usage.modelOption',
    `The option ${optionName(`${owner}binaries.semiMajorAxis`)} gives a pair ${separation.toPrecision(3)} apart at ${far.toPrecision(3)} from the origin, which the columns cannot resolve.`,
    'Give larger semi-major axes, a smaller offset, or double precision.',
  );
}
