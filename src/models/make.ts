/** Makes a snapshot of one or two spheres of bodies, each in equilibrium. */
import { UsageError } from '../errors.ts';
import { Random } from '../numerics/random.ts';
import { allocateColumn, type Particles } from '../snapshot/particles.ts';
import type { BodyView } from './sampling.ts';
import { startOfEncounter, type RelativeMotion } from './encounter.ts';
import {
  optionError,
  optionName,
  requirePositive,
  requireVector,
  type MakeOptions,
} from './options.ts';
import { planSphere, type SpherePlan } from './plan.ts';
import { shift } from './scaling.ts';
import { drawSphere, viewOf, type DrawnSphere } from './sphere.ts';

export type {
  BinaryOptions,
  ComponentOptions,
  EncounterOptions,
  EscaperOptions,
  MakeOptions,
  ModelName,
  SphereOptions,
} from './options.ts';
export { MODELS } from './plan.ts';

/** A model before its last steps: spheres at rest about the origin, pairs still as one body. */
export interface Draft {
  readonly spheres: readonly DrawnSphere[];
  /** Splits pairs, sends escapers off, puts two spheres on their orbit, moves everything. */
  finish(): Particles;
}

/**
 * Draws independent bodies from models in equilibrium, at time 0.
 *
 * Positions and velocities are as drawn: centre of mass and mean velocity differ from 0, and 2T/|W|
 * from 1, by the noise of a sample. See {@link recentre} and {@link virialScaling}.
 * @throws UsageError `usage.model`, `usage.modelOption`, `usage.massRange`, `usage.seed`,
 * `usage.distributionFunction`, `usage.encounter`
 */
export function makeModel(options: MakeOptions): Particles {
  return draftModel(options).finish();
}

/** The first part of {@link makeModel}, which ends where a virial ratio may be set. @throws as it */
export function draftModel(options: MakeOptions): Draft {
  const { gravity = 1, companion, float32 = false } = options;
  const { offset = [0, 0, 0], velocity = [0, 0, 0] } = options;
  requirePositive('gravity', gravity);
  requireVector('offset', offset);
  requireVector('velocity', velocity);
  const root = new Random(options.seed);
  const plans = [planSphere(options)];
  if (companion !== undefined) plans.push(planSphere(companion, 'companion.'));
  const motion = motionOf(options, plans, gravity);
  const count = plans.reduce((sum, plan) => sum + plan.count, 0);
  if (count >= 2 ** 32) throw optionError('count', count, 'at most 4294967295 in all');

  const type = float32 ? 'float32' : 'float64';
  const mantissaBits = float32 ? 24 : 53;
  const bodies = allocateBodies(count, type);
  const components = componentsOf(plans, count);
  // What has no distribution function is refused before anything is drawn.
  for (const plan of plans) for (const component of plan.components) component.source();
  let begin = 0;
  const spheres = plans.map((plan, order) => {
    const view = viewOf(bodies, begin, begin + plan.count);
    begin += plan.count;
    return drawSphere(plan, view, { gravity, mantissaBits, order }, root);
  });

  const reach = Math.max(...offset.map(Math.abs)) + (motion?.separation ?? 0);
  return {
    spheres,
    finish() {
      for (const sphere of spheres) sphere.complete(reach);
      if (motion !== null) setOut(spheres, motion);
      const particles: Particles = {
        count,
        ...bodies,
        ...components,
        time: 0,
        units: null,
        gravity,
        softening: null,
        frame: { kind: 'physical' },
        origin: { file: options.model, format: 'made', mantissaBits, remarks: [] },
      };
      shift(particles, offset, velocity);
      requireRange(particles);
      return particles;
    },
  };
}

function allocateBodies(count: number, type: 'float64' | 'float32'): BodyView {
  const column = () => allocateColumn(count, type);
  try {
    return {
      mass: column(),
      x: column(),
      y: column(),
      z: column(),
      vx: column(),
      vy: column(),
      vz: column(),
    };
  } catch (error) {
    if (!(error instanceof RangeError)) throw error;
    throw new UsageError(
      'usage.modelOption',
      `The option ${optionName('count')} asks for ${count} bodies, for which the memory of this process does not suffice.`,
      'Give fewer bodies.',
      { cause: error },
    );
  }
}

function motionOf(
  { companion, encounter }: MakeOptions,
  plans: readonly SpherePlan[],
  gravity: number,
): RelativeMotion | null {
  if (companion === undefined && encounter === undefined) return null;
  if (companion === undefined || encounter === undefined) {
    throw new UsageError(
      'usage.encounter',
      companion === undefined
        ? 'An encounter (--separation, --pericentre, --impact-parameter, --relative-velocity) needs a second sphere, companion (--companion).'
        : 'A companion (--companion) needs encounter.separation (--separation), its distance at the start.',
      'Give both or neither.',
    );
  }
  return startOfEncounter(encounter, gravity * plans.reduce((sum, { mass }) => sum + mass, 0));
}

/** Moves two spheres from the origin onto their orbit about the common centre of mass. */
function setOut(spheres: readonly DrawnSphere[], motion: RelativeMotion): void {
  const { separation, approach, sideways } = motion;
  const [first, second] = spheres;
  const whole = first.plan.mass + second.plan.mass;
  for (const [sphere, share] of [
    [first, -second.plan.mass / whole],
    [second, first.plan.mass / whole],
  ] as const) {
    shift(sphere.bodies, [share * separation, 0, 0], [-share * approach, share * sideways, 0]);
  }
}

/** The column of components, if there is more than one. @throws UsageError if a name comes twice */
function componentsOf(
  plans: readonly SpherePlan[],
  count: number,
): Pick<Particles, 'columns' | 'componentNames'> {
  const components = plans.flatMap((plan) => plan.components);
  if (components.length === 1) return { columns: {}, componentNames: [] };
  const componentNames = components.map(({ name }) => name);
  const twice = componentNames.find((name, k) => componentNames.indexOf(name) < k);
  if (twice !== undefined) {
    throw optionError('name', `"${twice}"`, 'the name of one component only', 'Name them apart.');
  }
  const component = new Uint16Array(new SharedArrayBuffer(2 * count));
  let begin = 0;
  components.forEach(({ options }, k) => {
    component.fill(k, begin, begin + options.count);
    begin += options.count;
  });
  return { columns: { component }, componentNames };
}

/** Scales near the ends of the columns' type may overflow or leave no mass. */
function requireRange({ mass, x, y, z, vx, vy, vz, count, origin }: Particles): void {
  for (let i = 0; i < count; i++) {
    // A sum is finite only if all its terms are.
    if (!(mass[i] > 0 && Number.isFinite(x[i] + y[i] + z[i] + vx[i] + vy[i] + vz[i]))) {
      throw new UsageError(
        'usage.modelOption',
        `Body ${i} has mass ${mass[i]}, position ${x[i]} ${y[i]} ${z[i]} and velocity ${vx[i]} ${vy[i]} ${vz[i]}, but all must be finite and the mass above 0 in columns of ${origin.mantissaBits} bits.`,
        'Choose units in which mass, scaleRadius and gravity are closer to 1.',
      );
    }
  }
}
