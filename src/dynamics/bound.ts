/**
 * The bound set by iterated unbinding: bodies with ½|v − v_c|² + φ ≥ 0 are removed, φ and v_c of the
 * rest found again, until nothing changes. A round removes at most the least bound quarter of the
 * set, and of a few bodies only the least bound one, since removing all at once can strip a set that
 * is warm as a whole. Fast bodies that have not been removed yet shift the mean velocity and with it
 * everybody's energy: where it is off the median, v_c is the median while there are bodies to remove.
 * Source: common practice; the cap per round and the median have no source.
 */
import { takeBuffer, takeDoubles } from '../numerics/reuse.ts';
import { sumForces, type Forces } from '../octree/forces.ts';
import { subtractBodies } from '../octree/subtract.ts';
import type { Crew } from '../parallel/crew.ts';
import type { SetField } from './balance.ts';
import { fieldOf } from './balance.ts';
import { countUnbound, frameOf, type BodySet, type SetFrame } from './sums.ts';
import type { Bodies } from './sums.task.ts';

export interface BoundSet {
  /** The bound bodies; `member` is null if all are bound. */
  readonly set: BodySet;
  /** Field of the bound bodies from themselves; the field of all where all are bound. */
  readonly field: SetField;
  readonly rounds: number;
  /** False if the rounds ran out before the set was stable. */
  readonly settled: boolean;
}

/** Enough to empty a set of 10⁸ bodies by quarters and at last one by one. */
const MOST_ROUNDS = 100;
const LARGEST_SHARE = 0.25;
/** Of at most this many bodies one is removed a round, by the mean velocity: a median would be one body's. */
const ONE_BY_ONE = 32;
/** A removal of more than this share of the set is summed again rather than subtracted. */
const SUM_AGAIN_ABOVE = 0.3;

/**
 * Finds the bound set.
 * @param specificEnergy - room for one number a body, overwritten
 */
export async function boundSet(
  bodies: Bodies,
  forces: Forces,
  specificEnergy: Float64Array,
  crew: Crew,
): Promise<BoundSet> {
  const whole = fieldOf(forces);
  const { count } = bodies;
  let set: BodySet = { bodies, member: null };
  let field = whole;
  let kept: Uint8Array | null = null;
  for (let round = 0; round < MOST_ROUNDS; round++) {
    const frame = await frameOf(set, crew);
    if (frame.particles === 0) return { set, field, rounds: round, settled: true };
    const countIn = (velocityFrame: typeof frame) =>
      countUnbound(set, velocityFrame, field.potential, specificEnergy, crew);
    let unbound = await countIn(frame);
    if (unbound === 0) return { set, field, rounds: round, settled: true };
    const robust = frame.particles > ONE_BY_ONE ? medianFrame(set, frame) : null;
    if (robust !== null) {
      const inMedianFrame = await countIn(robust);
      unbound = inMedianFrame > 0 ? inMedianFrame : await countIn(frame);
    }
    if (kept === null) {
      kept = new Uint8Array(takeBuffer(count), 0, count).fill(1);
      field = copied(whole);
      set = { bodies, member: kept };
    }
    const removed = leastBound(specificEnergy, kept, unbound, frame.particles);
    for (const i of removed) kept[i] = 0;
    if (frame.particles === removed.length) continue;
    const subtract = removed.length <= SUM_AGAIN_ABOVE * frame.particles;
    const done = subtract && (await subtractBodies(bodies, removed, kept, forces, field, crew));
    if (!done) await sumAgain(bodies, kept, forces, field, crew);
  }
  return { set, field, rounds: MOST_ROUNDS, settled: false };
}

const MEDIAN_SAMPLE = 4095;
/** Mean and median differ if by more than this many interquartile ranges over √sample: some 5σ. */
const MEDIAN_OFF = 5;

/**
 * The frame with its velocity replaced by medians by mass, component by component, over a sample of
 * the set; null if the mean velocity agrees with them.
 */
function medianFrame({ bodies, member }: BodySet, frame: SetFrame): SetFrame | null {
  const { mass } = bodies;
  const size = Math.min(frame.particles, MEDIAN_SAMPLE);
  const sample = new Uint32Array(size);
  let sampleMass = 0;
  for (let i = 0, k = 0, taken = 0; taken < size; i++) {
    if (member !== null && member[i] === 0) continue;
    if (k++ < Math.floor(((taken + 0.5) * frame.particles) / size)) continue;
    sample[taken++] = i;
    sampleMass += mass[i];
  }
  if (sampleMass === 0) return null;
  const robust = frame.frame.slice();
  let off = false;
  [bodies.vx, bodies.vy, bodies.vz].forEach((column, axis) => {
    sample.sort((a, b) => column[a] - column[b]);
    const at = (share: number): number => {
      let k = 0;
      let rest = share * sampleMass - mass[sample[0]];
      while (rest > 0 && k + 1 < size) rest -= mass[sample[++k]];
      return column[sample[k]];
    };
    const median = at(0.5);
    const range = at(0.75) - at(0.25);
    if (Math.abs(median - robust[3 + axis]) > (MEDIAN_OFF * range) / Math.sqrt(size)) off = true;
    robust[3 + axis] = median;
  });
  return off ? { ...frame, frame: robust } : null;
}

/** Unbound members, or if they are more than a round may remove, the least bound of them. */
function leastBound(
  specificEnergy: Float64Array,
  kept: Uint8Array,
  unbound: number,
  particles: number,
): Uint32Array {
  const indices = new Uint32Array(unbound);
  for (let i = 0, k = 0; i < kept.length; i++) {
    if (kept[i] === 1 && specificEnergy[i] >= 0) indices[k++] = i;
  }
  const most = particles > ONE_BY_ONE ? Math.floor(LARGEST_SHARE * particles) : 1;
  if (unbound <= most) return indices;
  const energies = Float64Array.from(indices, (i) => specificEnergy[i]).sort();
  const limit = energies[unbound - most];
  return indices.filter((i) => specificEnergy[i] >= limit);
}

function copied(field: SetField): SetField {
  const copy = (column: Float64Array) => {
    const to = takeDoubles(column.length);
    to.set(column);
    return to;
  };
  const potential = copy(field.potential);
  const clausiusShare =
    field.clausiusShare === field.potential ? potential : copy(field.clausiusShare);
  return { ...field, potential, clausiusShare };
}

/** Sums the field of the kept bodies on themselves from the start. */
async function sumAgain(
  bodies: Bodies,
  kept: Uint8Array,
  forces: Forces,
  field: SetField,
  crew: Crew,
): Promise<void> {
  const indices = new Uint32Array(kept.length);
  let size = 0;
  for (let i = 0; i < kept.length; i++) if (kept[i] === 1) indices[size++] = i;
  const pick = (column: ArrayLike<number>) => {
    const picked = takeDoubles(size);
    for (let k = 0; k < size; k++) picked[k] = column[indices[k]];
    return picked;
  };
  const columns = {
    x: pick(bodies.x),
    y: pick(bodies.y),
    z: pick(bodies.z),
    mass: pick(bodies.mass),
  };
  const { gravity, level } = forces;
  const { lengths, ...one } = forces.softening;
  const softening = lengths === undefined ? one : { ...one, lengths: pick(lengths) };
  const again = await sumForces(
    columns,
    { gravity, softening, errorWanted: 1, ...(level ? { level } : {}), exact: level === null },
    crew,
  );
  for (let k = 0; k < size; k++) {
    field.potential[indices[k]] = again.potential[k];
    field.clausiusShare[indices[k]] = again.clausiusShare[k];
  }
}
