/**
 * Lagrangian radii: the radii about a centre that hold given fractions of a set's mass.
 *
 * Convention (common practice): cumulative mass with half of each body's own mass, linear between
 * bodies; below the first midpoint the first body's radius, above the last the last one's.
 */
import type * as LagrangianTask from './lagrangian.task.ts';
import { crewOfOne, type Crew, type TaskModule } from '../parallel/crew.ts';
import { addSlices, SLICES, type Bins } from './lagrangian.task.ts';
import type { LagrangianRadii, Vector } from './record.ts';
import type { BodySet, SetFrame } from './sums.ts';

const TASK: TaskModule<typeof LagrangianTask> = {
  url: new URL('./lagrangian.task.js', import.meta.url),
  load: () => import('./lagrangian.task.ts'),
};

const IN_PLACE = 100_000;
const MOST_BINS = 65536;
/** Fewer effective bodies than this inside a radius or outside it, and its error is not told. */
const FEWEST_FOR_ERROR = 3;

/**
 * Lagrangian radii with sampling errors.
 *
 * The error is that of an order statistic: with s = √(f(1 − f)/N_eff), half the distance between the
 * radii of f − s and f + s. Source: derived from the binomial variance of the enclosed fraction;
 * N_eff = (Σm)²/Σm².
 * @param scratch - room for one number a body, overwritten
 */
export async function lagrangianRadii(
  set: BodySet,
  { mass, squaredMass, heavy }: SetFrame,
  centre: Vector,
  fractions: readonly number[],
  scratch: Float64Array,
  crew: Crew,
): Promise<LagrangianRadii> {
  if (heavy === 0) {
    const none = fractions.map(() => null);
    return { fractions, radii: none, errors: none };
  }
  const effective = (mass * mass) / squaredMass;
  const steps = fractions.map((f) => Math.sqrt((f * (1 - f)) / effective));
  const wanted = fractions.flatMap((f, k) => [f, f - steps[k], f + steps[k]]);
  const radii = await radiiOfMass(set, centre, mass, wanted, scratch, crew);
  return {
    fractions,
    radii: fractions.map((_, k) => radii[3 * k]),
    errors: fractions.map((f, k) => {
      const told = Math.min(f, 1 - f) * effective >= FEWEST_FOR_ERROR && f + steps[k] < 1;
      return told ? (radii[3 * k + 2] - radii[3 * k + 1]) / 2 : null;
    }),
  };
}

/** Radii about a centre inside which the given fractions (clipped to 0 … 1) of the set's mass lie. */
export async function radiiOfMass(
  set: BodySet,
  centre: Vector,
  mass: number,
  fractions: readonly number[],
  distance2: Float64Array,
  crew: Crew,
): Promise<number[]> {
  const { bodies, member } = set;
  const workers = bodies.count < IN_PLACE ? crewOfOne() : crew;
  const columns = { mass: bodies.mass, member, distance2 };
  const words = new Uint32Array(new SharedArrayBuffer(SLICES * 8));
  const positions = { x: bodies.x, y: bodies.y, z: bodies.z, centre: Float64Array.from(centre) };
  await workers.run(TASK, 'measureDistances', { ...columns, ...positions, words }, SLICES);
  const bins = binsFor(words, bodies.count);
  const masses = new Float64Array(new SharedArrayBuffer(bins.count * SLICES * 8));
  await workers.run(TASK, 'weighBins', { ...columns, bins, masses }, SLICES);
  const binMass = addSlices(masses, bins.count);
  const inside = new Float64Array(bins.count + 1); // mass inside each bin's lower edge
  for (let bin = 0; bin < bins.count; bin++) inside[bin + 1] = inside[bin] + binMass[bin];

  const targets = fractions.map((f) => Math.min(1, Math.max(0, f)) * mass);
  const wanted = new Uint8Array(bins.count);
  for (const target of targets) {
    for (const bin of binsAround(binMass, inside, target)) wanted[bin] = 1;
  }
  const collected = (await workers.run(TASK, 'collectBins', { ...columns, bins, wanted }, SLICES))
    .flat()
    .sort((a, b) => a.slice - b.slice);
  const found = collected.flatMap(({ bodies: list }) => [...list]);
  const order = Float64Array.from(found, (i) => distance2[i]);
  const sorted = found.map((_, k) => k).sort((a, b) => order[a] - order[b] || a - b);
  const bits = new Uint32Array(distance2.buffer);
  const highWord = new Uint8Array(new Uint32Array([1]).buffer)[0] === 1 ? 1 : 0;

  // Midpoints of the collected bodies in order of radius; each bin starts from the mass inside it.
  const midpoints = new Float64Array(sorted.length);
  const radii = new Float64Array(sorted.length);
  let bin = -1;
  let cumulative = 0;
  sorted.forEach((k, at) => {
    const i = found[k];
    const own = (bits[2 * i + highWord] - bins.low) >>> bins.shift;
    if (own !== bin) {
      bin = own;
      cumulative = inside[bin];
    }
    midpoints[at] = cumulative + bodies.mass[i] / 2;
    cumulative += bodies.mass[i];
    radii[at] = Math.sqrt(order[k]);
  });
  return targets.map((target) => interpolate(midpoints, radii, target));
}

/** The bin that holds the target mass, and the nearest ones with mass on either side. */
function binsAround(binMass: Float64Array, inside: Float64Array, target: number): number[] {
  let low = 0;
  let high = binMass.length - 1;
  while (low < high) {
    const mid = (low + high) >>> 1;
    if (inside[mid + 1] < target) low = mid + 1;
    else high = mid;
  }
  const around = [low];
  for (let bin = low - 1; bin >= 0; bin--) {
    if (binMass[bin] === 0) continue;
    around.push(bin);
    break;
  }
  for (let bin = low + 1; bin < binMass.length; bin++) {
    if (binMass[bin] === 0) continue;
    around.push(bin);
    break;
  }
  return around;
}

function binsFor(words: Uint32Array, bodies: number): Bins {
  let low = 0xffffffff;
  let high = 0;
  for (let k = 0; k < words.length; k += 2) {
    low = Math.min(low, words[k]);
    high = Math.max(high, words[k + 1]);
  }
  const most = Math.min(MOST_BINS, Math.max(16, bodies));
  let shift = 0;
  while ((high - low) / 2 ** shift >= most - 1) shift++;
  return { low, shift, count: Math.floor((high - low) / 2 ** shift) + 1 };
}

function interpolate(midpoints: Float64Array, radii: Float64Array, target: number): number {
  const last = midpoints.length - 1;
  let after = 0;
  while (after <= last && midpoints[after] <= target) after++;
  if (after === 0) return radii[0];
  if (after > last) return radii[last];
  const share = (target - midpoints[after - 1]) / (midpoints[after] - midpoints[after - 1]);
  return radii[after - 1] + share * (radii[after] - radii[after - 1]);
}
