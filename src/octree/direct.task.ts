/** Direct sums over all pairs: work of the crew. */
import type { TakeJob } from '../parallel/crew.ts';
import type { FieldColumns } from './forces.task.ts';
import { pairKernelsOf, pairSofteningOf } from './pairs.ts';
import { isOfEach, type Softening } from './softening.ts';

export interface DirectRound {
  readonly x: Float64Array;
  readonly y: Float64Array;
  readonly z: Float64Array;
  readonly mass: Float64Array;
  /** e² of each body, where they have softening lengths of their own. */
  readonly squares: Float64Array;
  readonly softening: Softening;
  readonly field: FieldColumns;
}

export interface PairRound extends DirectRound {
  /** Blocks that the bodies are cut into: an even number, or 1. */
  readonly blocks: number;
  /** One number: jobs done. */
  readonly done: Int32Array;
}

/** Jobs of {@link sumAllPairs}: each block with itself, then each pair of blocks. */
export const pairJobs = (blocks: number): number => (blocks * (blocks + 1)) / 2;

/**
 * Sums each pair of bodies once, both ways. First each block with itself; then, as in a tournament
 * where all play all, in every phase each block meets one other. So no two jobs of a phase write to
 * the same bodies, and the order in which a body's sums grow does not depend on the threads.
 * @returns pairs at one point that were left out inside blocks; between blocks they spoil unsoftened sums
 */
export function sumAllPairs(round: PairRound, takeJob: TakeJob): number {
  const { x, y, z, mass, squares, softening, field, blocks, done } = round;
  const force = field.ax.length > 0;
  const { inside, between } = pairKernelsOf(softening.kernel, force, isOfEach(softening));
  const soft = pairSofteningOf(softening.kernel, softening.length);
  const beginOf = (block: number) => Math.floor((block * mass.length) / blocks);
  let coincident = 0;
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    if (job < blocks) {
      const begin = beginOf(job);
      const end = beginOf(job + 1);
      for (const column of Object.values(field) as Float64Array[]) column.fill(0, begin, end);
      coincident += inside(x, y, z, mass, begin, end, 0, field, soft, squares);
    } else {
      const phase = Math.floor((job - blocks) / (blocks / 2));
      waitFor(done, blocks + (phase * blocks) / 2);
      const [a, b] = meeting(blocks, phase, (job - blocks) % (blocks / 2));
      between(
        x,
        y,
        z,
        mass,
        beginOf(a),
        beginOf(a + 1),
        beginOf(b),
        beginOf(b + 1),
        0,
        field,
        soft,
        squares,
      );
    }
    Atomics.add(done, 0, 1);
    Atomics.notify(done, 0);
  }
  return coincident;
}

/** Jobs are taken in order and each one ends, so what is waited for comes. */
function waitFor(done: Int32Array, jobs: number): void {
  for (let now = Atomics.load(done, 0); now < jobs; now = Atomics.load(done, 0)) {
    Atomics.wait(done, 0, now);
  }
}

/** The two blocks of a table of a round robin: one stays in its place, the others go round. */
function meeting(blocks: number, phase: number, table: number): [number, number] {
  const round = blocks - 1;
  if (table === 0) return [round, phase];
  return [(phase + table) % round, (phase - table + round) % round];
}

/** Targets a job of the one-way direct sum handles. */
export const DIRECT_TARGETS = 64;

/** Direct sums on all bodies from all others, one way, in input order. Returns coincident pairs (each counted once a side). */
export function sumDirectly(round: DirectRound, takeJob: TakeJob): number {
  const { x, y, z, mass, squares, softening, field } = round;
  const force = field.ax.length > 0;
  const soft = softening.kernel !== 'none';
  const each = isOfEach(softening);
  const { atPoint } = pairKernelsOf(softening.kernel, force, each);
  const length = pairSofteningOf(softening.kernel, softening.length);
  const count = mass.length;
  const out = new Float64Array(5);
  let coincident = 0;
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    for (let i = job * DIRECT_TARGETS; i < Math.min(count, (job + 1) * DIRECT_TARGETS); i++) {
      out.fill(0);
      const [px, py, pz] = [x[i], y[i], z[i]];
      const own = each ? squares[i] : length;
      coincident += atPoint(px, py, pz, x, y, z, mass, 0, i, out, own, squares);
      coincident += atPoint(px, py, pz, x, y, z, mass, i + 1, count, out, own, squares);
      field.phi[i] = out[0];
      if (soft) field.psi[i] = out[1];
      if (force) {
        field.ax[i] = out[2];
        field.ay[i] = out[3];
        field.az[i] = out[4];
      }
    }
  }
  return coincident;
}
