/** Particles → record: the order of the work, and nothing else. */
import { takeDoubles } from '../numerics/reuse.ts';
import { InputError } from '../errors.ts';
import type { ExternalField } from '../models/external.ts';
import { buildOctree } from '../octree/build.ts';
import { PROMISED_SIGMAS, sumForces, type Forces, type ForceStage } from '../octree/forces.ts';
import type { Softening } from '../octree/softening.ts';
import type { Crew } from '../parallel/crew.ts';
import { toPhysical } from '../snapshot/frame.ts';
import type { Particles } from '../snapshot/particles.ts';
import { balanceOf, fieldOf } from './balance.ts';
import { boundSet } from './bound.ts';
import { findCentre } from './centre.ts';
import { coincidentPairs, duplicateIds } from './duplicates.ts';
import { externalFigures, externalRemark } from './external.ts';
import { fitFileForces, type FileForces } from './fileForces.ts';
import { forcesFromFile, requireFileForces, requireForceColumns } from './forcesFromFile.ts';
import { lagrangianRadii } from './lagrangian.ts';
import { measureExtras } from './measureExtras.ts';
import {
  RECORD_VERSION,
  type MeasureRecord,
  type RecordSettings,
  type TimeSetting,
  type Vector,
} from './record.ts';
import { findRemarks } from './remarks.ts';
import { settle, type MeasureOptions } from './settings.ts';
import { frameOf } from './sums.ts';
import { coulombLogarithm, crossingTime, halfMassRelaxationTime, virialRadius } from './times.ts';

/** Pairs of coincident bodies that a remark names. */
const PAIRS_NAMED = 3;

export interface MeasureContext {
  /** Seconds that reading took, for the engine's report. */
  readonly readSeconds?: number;
  /** Run file whose defaults are among the options, for the record. */
  readonly runFile?: string | null;
  /** Time that was stated for the snapshot from outside; what the particles say if not given. */
  readonly time?: TimeSetting | null;
  readonly onStage?:
    ((stage: ForceStage | 'dynamics', fraction: number | null) => void) | undefined;
}

/**
 * Measures one snapshot.
 * @param given - screened bodies; not changed
 * @throws UsageError for options that contradict each other or the snapshot; InputError
 *   `input.coincident` if bodies lie at one point, nothing is softened and refusal was asked for;
 *   InputError `input.missingForces` and `input.fileForces` if U and W are to come from the file and
 *   cannot, and `input.missingSoftening` if softening lengths of single bodies are asked for and are not
 *   there; UnanswerableError `unanswerable.periodicBox` for bodies that are no single object in
 *   their box
 */
export async function measureParticles(
  given: Particles,
  options: MeasureOptions,
  crew: Crew,
  context: MeasureContext = {},
): Promise<MeasureRecord> {
  const start = performance.now();
  const particles = toPhysical(given);
  const { file, selection } = particles.origin;
  const decided = settle(options, particles);
  const settings = context.time ? { ...decided, time: context.time } : decided;
  const gravity = settings.gravity.value;
  const settledFields = fieldsOf(options);
  const { length } = settings.softening.value;
  const fromFile = settings.forces.value === 'file';
  if (fromFile) requireForceColumns(given, '--forces file');
  const own = await sumForces(
    particles,
    {
      gravity,
      softening: softeningFor(settings, particles),
      errorWanted: settings.error.value,
      exact: settings.exact.value,
      accelerations: fromFile && particles.columns.acceleration !== undefined,
      onStage: (stage) => context.onStage?.(stage, null),
    },
    crew,
  );
  if (!Number.isFinite(own.potentialEnergy)) throw overflow(file, 'the potential energy');
  const summed = performance.now();
  context.onStage?.('dynamics', null);
  const coincident =
    own.coincidentPairs > 0 ? coincidentPairs(particles, own.softening, PAIRS_NAMED) : [];
  if (coincident.length > 0 && options.coincident === 'refuse') {
    const [a, b] = coincident[0];
    throw new InputError(
      'input.coincident',
      `${file}: bodies ${a} and ${b} lie at one point (pairs at one point in all: ${own.coincidentPairs})`,
      'state the softening of the run, or leave these pairs out with --coincident leave-out',
    );
  }

  const fileForces = fromFile ? fitFileForces(particles, own) : null;
  const forces = fileForces ? await takeFromFile(particles, own, fileForces, crew) : own;
  const whole = await balanceOf({ bodies: particles, member: null }, fieldOf(forces), crew);
  if (!(whole.balance.mass > 0)) {
    throw new InputError(
      'input.zeroMass',
      `${file}: no body has mass`,
      'check which column is the mass, and its type and scale',
    );
  }
  // Memory that has done its work is at hand: only the tree itself is used from here on.
  const spare = forces.tree?.multipoles;
  const scratch =
    spare && spare.length >= particles.count
      ? spare.subarray(0, particles.count)
      : takeDoubles(particles.count);
  const bound = await boundSet(particles, forces, scratch, crew);
  const boundBalance =
    bound.set.member === null ? whole : await balanceOf(bound.set, bound.field, crew);
  const centreAsked = settings.centre.value;
  const tree = forces.tree?.tree ?? (await buildOctree(particles, crew));
  const centre = await findCentre(particles, whole.frame, forces, tree, centreAsked, crew);
  const fractions = settings.fractions.value;
  const radiiOf = (result: typeof whole, set: typeof bound.set) =>
    lagrangianRadii(set, result.frame, centre.centre, fractions, scratch, crew);
  const lagrangian = await radiiOf(whole, { bodies: particles, member: null });
  const boundLagrangian =
    bound.set.member === null ? lagrangian : await radiiOf(boundBalance, bound.set);

  const { frame, sums, balance } = whole;
  const halfMassRadius = lagrangian.radii[fractions.indexOf(0.5)] ?? 0;
  const virial = virialRadius(gravity, balance.mass, balance.potential);
  const meanSquareVelocity = (2 * balance.kinetic) / balance.mass;
  const coulombFactor = settings.coulombFactor.value;
  const logarithm = coulombLogarithm({
    particles: frame.heavy,
    coulombFactor,
    gravity,
    mass: balance.mass,
    halfMassRadius,
    meanSquareVelocity,
    softening: length,
  });
  const extras = await measureExtras(
    {
      particles,
      settings,
      forces,
      tree,
      whole,
      bound,
      boundBalance,
      centre: centre.centre,
      coulombLogarithm: logarithm,
      scratch,
    },
    crew,
  );
  const external =
    settledFields.length === 0
      ? null
      : externalFigures(settledFields, {
          particles,
          gravity,
          whole: balance,
          boundMass: boundBalance.balance.mass,
          centreOfMass: vector(frame.frame, 0),
          centre: centre.centre,
          halfMassRadius,
        });
  const record = {
    record: RECORD_VERSION,
    file,
    time: settings.time.value,
    runFile: context.runFile ?? null,
    ...(selection && { selection }),
    settings,
    frame: {
      centreOfMass: vector(frame.frame, 0),
      meanVelocity: vector(frame.frame, 3),
      centre: centre.centre,
      centreMethod: centre.method,
      angularMomentum: sums.angularMomentum,
    },
    whole: balance,
    bound: boundBalance.balance,
    lagrangian,
    boundLagrangian,
    halfMassRadius,
    virialRadius: virial,
    coreRadius: centre.coreRadius,
    velocityDispersion: Math.sqrt(meanSquareVelocity / 3),
    effectiveNumber: (balance.mass * balance.mass) / frame.squaredMass,
    momentOfInertia: sums.momentOfInertia,
    momentOfInertiaRate: sums.momentOfInertiaRate,
    crossingTime: crossingTime(gravity, balance.mass, virial),
    relaxation: {
      time: halfMassRelaxationTime(frame.heavy, balance.mass, gravity, halfMassRadius, logarithm),
      coulombFactor,
      coulombLogarithm: logarithm,
    },
    ...extras.figures,
    ...(external && { external }),
  } as const;
  const unfit = firstNotFinite(record);
  if (unfit !== null) throw overflow(file, unfit);
  const remarks = findRemarks({
    particles,
    record,
    frame,
    forces,
    bound,
    centreAsked,
    largestMass: largest(particles.mass),
    duplicates: duplicateIds(particles.columns.id),
    coincident,
    fileForces,
  });
  const end = performance.now();
  const { costs } = forces;
  const read = context.readSeconds ?? 0;
  return {
    ...record,
    engine: {
      origin: forces.origin,
      order: forces.level?.order ?? null,
      tolerance: forces.level?.tolerance ?? null,
      errorWanted: settings.error.value,
      errorMeasured:
        forces.potentialEnergy === 0
          ? 0
          : (PROMISED_SIGMAS * forces.potentialError) / Math.abs(forces.potentialEnergy),
      interactions: costs.cellInteractions + costs.pairInteractions,
      threads: crew.threads,
      seconds: {
        read,
        tree: costs.seconds.tree,
        forces: costs.seconds.forces,
        error: costs.seconds.error,
        dynamics: (end - summed) / 1000,
        total: read + (end - start) / 1000,
      },
    },
    remarks: [...remarks, ...extras.remarks, ...(external ? [externalRemark(external)] : [])],
  };
}

function fieldsOf({ external = [] }: MeasureOptions): readonly ExternalField[] {
  if (typeof external !== 'string') return external;
  throw new Error('the file of external fields was not read before');
}

/** @throws InputError if U and W cannot be had from the columns */
async function takeFromFile(
  particles: Particles,
  own: Forces,
  fit: FileForces,
  crew: Crew,
): Promise<Forces> {
  requireFileForces(particles, fit);
  const { frame } = await frameOf({ bodies: particles, member: null }, crew);
  return forcesFromFile(particles, own, fit, frame);
}

const vector = (numbers: ArrayLike<number>, at: number): Vector => [
  numbers[at],
  numbers[at + 1],
  numbers[at + 2],
];

function overflow(file: string, what: string): InputError {
  return new InputError(
    'input.overflow',
    `${file}: ${what} is beyond the range of double precision`,
    'check byte order, types and units: masses, lengths and velocities this extreme are rarely meant',
  );
}

/** The softening of the forces: the setting, with the lengths of the single bodies where it is theirs. */
function softeningFor({ softening }: RecordSettings, { columns }: Particles): Softening {
  const { kernel, length, ofBodies } = softening.value;
  const lengths = ofBodies === undefined ? undefined : columns.softening;
  return { kernel, length, ...(lengths !== undefined && { lengths }) };
}

/** Key of the first number that is not finite, or null. */
function firstNotFinite(value: unknown, key = ''): string | null {
  if (typeof value === 'number') return Number.isFinite(value) ? null : key;
  if (value === null || typeof value !== 'object') return null;
  for (const [name, inner] of Object.entries(value)) {
    const found = firstNotFinite(inner, key === '' ? name : `${key}.${name}`);
    if (found !== null) return found;
  }
  return null;
}

function largest(column: ArrayLike<number>): number {
  let most = 0;
  for (let i = 0; i < column.length; i++) if (column[i] > most) most = column[i];
  return most;
}
