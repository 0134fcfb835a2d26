/** A model snapshot in its own frame, scaled to a virial ratio if wanted, and set on its way. */
import { CompensatedSum } from '../numerics/compensated.ts';
import { refuseClash } from '../dynamics/settings.ts';
import { UsageError } from '../errors.ts';
import { draftModel, type MakeOptions, type SphereOptions } from '../models/make.ts';
import type { BodyView } from '../models/sampling.ts';
import { recentre, scaleVelocities, virialScaling } from '../models/scaling.ts';
import { sumForces } from '../octree/forces.ts';
import type { SofteningKernel } from '../octree/softening.ts';
import type { Crew } from '../parallel/crew.ts';
import type { Particles } from '../snapshot/particles.ts';
import { loadUnits, unitSystemOf, type Units } from '../snapshot/ownUnits.ts';
import { BYTES_A_BODY, requireMemoryToMake } from './memory.ts';

export interface MakeSnapshotOptions extends MakeOptions {
  /** Name of a unit system, a file of units (`.json`), or sizes; sets G unless `gravity` is given. */
  readonly units?: Units;
  /**
   * Wanted 2T/|W| of each sphere by itself, with the softening given, binaries as one body each and before
   * escapers are sent off; without it nothing is scaled.
   */
  readonly virialRatio?: number;
  /** Plummer-equivalent length of the softening the bodies will be run with [length]. */
  readonly softening?: number;
  readonly softeningKernel?: SofteningKernel;
}

/** Relative error of W that the scaling asks of the engine; the ratio is as exact as W. */
const ERROR_OF_SCALING = 1e-6;

/**
 * Makes a model and, with `virialRatio`, takes out the centre of mass and mean velocity of each sphere and
 * scales its velocities so that 2T/|W| has the value wanted (to 1e-6; exactly up to 4096 bodies).
 * Binaries, escapers, the orbit of two spheres, offset and bulk velocity come after that.
 *
 * @returns particles that state G, the units if named, and the softening if it is Plummer's
 * @throws UsageError of `makeModel`, `usage.units`, `usage.gravityClash`, `usage.softening`,
 * `usage.softeningKernel`, `usage.virialRatio`; InputError of a file of units; UnanswerableError
 * `unanswerable.virialScaling`
 */
export async function makeSnapshot(options: MakeSnapshotOptions, crew: Crew): Promise<Particles> {
  const { units: stated, virialRatio, softening: length = 0 } = options;
  const units = stated === undefined ? null : unitSystemOf(await loadUnits(stated));
  refuseClash('', units, options.gravity ?? null);
  const gravity = options.gravity ?? units?.gravity ?? 1;
  const kernel = options.softeningKernel ?? (length > 0 ? 'plummer' : 'none');
  requireSoftening(length, kernel);
  const softening = { kernel, length: kernel === 'none' ? 0 : length };
  if (virialRatio !== undefined) virialScaling(1, -1, virialRatio); // Refuses a bad ratio before the work.

  requireMemoryToMake(countOf(options), bytesABody(options));
  const draft = draftModel({ ...options, gravity });
  if (virialRatio !== undefined) {
    for (const { systems } of draft.spheres) {
      recentre(systems);
      const wanted = { gravity, softening, errorWanted: ERROR_OF_SCALING };
      const { clausius } = await sumForces(systems, wanted, crew);
      scaleVelocities(systems, virialScaling(kineticOf(systems), clausius, virialRatio));
    }
  }
  const particles = draft.finish();
  // A file holds a length but no kernel, and a reader of it takes Plummer's: say nothing rather than wrong.
  return { ...particles, units, softening: kernel === 'plummer' ? length : null };
}

/** Bodies of all components of both spheres. */
function countOf({ companion, ...sphere }: MakeOptions): number {
  const spheres: readonly SphereOptions[] =
    companion === undefined ? [sphere] : [sphere, companion];
  return spheres.reduce((sum, { count, second }) => sum + count + (second?.count ?? 0), 0);
}

/** Seven columns, the component and scratch; what the forces take where a ratio is wanted. */
function bytesABody({ float32 = false, virialRatio }: MakeSnapshotOptions): number {
  return (float32 ? 28 : 56) + 10 + (virialRatio === undefined ? 0 : BYTES_A_BODY);
}

/** T of bodies whose mean velocity is 0. */
function kineticOf({ mass, vx, vy, vz }: BodyView): number {
  const sum = new CompensatedSum();
  for (let i = 0; i < mass.length; i++)
    sum.add(0.5 * mass[i] * (vx[i] ** 2 + vy[i] ** 2 + vz[i] ** 2));
  return sum.value();
}

function requireSoftening(length: number, kernel: SofteningKernel): void {
  if (!(length >= 0 && Number.isFinite(length))) {
    throw new UsageError(
      'usage.softening',
      `--softening ${length} is not a length of 0 or more`,
      'give the Plummer-equivalent length in the unit of length of the model',
    );
  }
  if (kernel !== 'none' && length === 0) {
    throw new UsageError(
      'usage.softeningKernel',
      `--softening-kernel ${kernel} needs a length`,
      'add --softening LENGTH',
    );
  }
}
