/** What the engine takes for one set of bodies: on warm pages, and cold in a fresh process. */
import { DEFAULT_ERROR } from '../../dist/dynamics/settings.js';
import { measureParticles } from '../../dist/dynamics/measure.js';
import { reusingMemory } from '../../dist/numerics/reuse.js';
import { buildOctree } from '../../dist/octree/build.js';
import { PROMISED_SIGMAS, sumForces } from '../../dist/octree/forces.js';
import { readSnapshot } from '../../dist/snapshot/read.js';
import { inFreshProcess, least } from './tools.js';

const BYTES_A_BODY = 56;

/** Times that work is repeated after its warm-up. */
export const repeatsFor = (count) => (count >= 1e7 ? 1 : count >= 1e6 ? 3 : count >= 1e5 ? 5 : 20);

export function measureOptions({ kernel, length }) {
  return kernel === 'none' ? {} : { softening: length, softeningKernel: kernel };
}

// Big arrays go back to the store at the end of a run: only numbers may leave it.
const timed = (times, work) => least(times, () => reusingMemory(work));

/** Work that sums all forces, for {@link timed}. */
function summing(particles, softening, crew, picked, extra) {
  return async () => {
    const options = { gravity: 1, softening, errorWanted: DEFAULT_ERROR, ...extra };
    const forces = await sumForces(particles, options, crew);
    return {
      errorOfU: (PROMISED_SIGMAS * forces.potentialError) / Math.abs(forces.potentialEnergy),
      errorOfA: forces.accelerationError,
      errorSeconds: forces.costs.seconds.error,
      order: forces.level?.order ?? null,
      picked: picked.map((body) => forces.potential[body]),
    };
  };
}

const withoutError = (run) => run.seconds - run.result.errorSeconds;

/** Sums and core record on warm pages, as in a series from the second snapshot on. */
export async function coreCosts(particles, softening, crew, picked = []) {
  const repeats = repeatsFor(particles.count);
  const forces = await timed(repeats, summing(particles, softening, crew, picked, {}));
  const whole = await timed(repeats, async () => {
    const record = await measureParticles(particles, measureOptions(softening), crew);
    return record.engine.seconds;
  });
  const { errorSeconds, order, errorOfU } = forces.result;
  return {
    forcesSeconds: withoutError(forces),
    errorSeconds,
    wholeSeconds: whole.seconds,
    errorShare: whole.result.error / whole.result.total,
    order,
    errorOfU,
    picked: forces.result.picked,
  };
}

/**
 * These and what else is measured on warm pages.
 * @param crews - `all` threads, and `one`
 * @param picked - bodies whose potentials are wanted
 */
export async function warmCosts(particles, softening, crews, picked) {
  const { count } = particles;
  const repeats = repeatsFor(count);
  const build = await timed(repeats, async () => {
    await buildOctree(particles, crews.all);
  });
  const single = await timed(
    count >= 1e7 ? 0 : count >= 1e6 ? 1 : repeats,
    summing(particles, softening, crews.one, [], {}),
  );
  const accelerations = await timed(
    repeats,
    summing(particles, softening, crews.all, [], { accelerations: true }),
  );
  const core = await coreCosts(particles, softening, crews.all, picked);
  // The record itself has no accelerations: what they add to the sums is added to it.
  const added = accelerations.seconds - core.forcesSeconds - core.errorSeconds;
  return {
    buildSeconds: build.seconds,
    ...core,
    accelerationsSeconds: withoutError(accelerations),
    wholeWithAccelerationsSeconds: core.wholeSeconds + added,
    errorOfA: accelerations.result.errorOfA,
    overOneThread: withoutError(single) / core.forcesSeconds,
  };
}

/** Bytes a second [GB/s] at which each file is read, onto warm pages. */
export async function readingRates(count, files) {
  const rates = [];
  for (const file of files) {
    const read = () =>
      reusingMemory(async () => {
        await readSnapshot(file, {});
      });
    const { seconds } = await least(repeatsFor(count), read);
    rates.push((count * BYTES_A_BODY) / seconds / 1e9);
  }
  return rates;
}

let baseBytes = null;

/**
 * Cold: the same file measured by fresh processes, as one call of the command line does; seconds of
 * the fastest, and the greatest peak of memory beyond that of a process that measures 5000 bodies.
 */
export function coldCosts(file, count, softening, threads) {
  baseBytes ??= inFreshProcess('peak.js', 'few', threads).peak;
  const options = JSON.stringify(measureOptions(softening));
  const runs = Array.from({ length: count >= 1e7 ? 1 : 3 }, () =>
    inFreshProcess('peak.js', file, threads, options),
  );
  const [{ seconds }] = runs.toSorted((a, b) => a.seconds.total - b.seconds.total);
  return { seconds, peakBytes: Math.max(...runs.map(({ peak }) => peak)) - baseBytes };
}
