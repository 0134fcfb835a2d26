/** Makes a snapshot of an equilibrium model. */
import { UsageError } from '../errors.ts';
import { Random } from '../numerics/random.ts';
import { allocateColumn, type Particles } from '../snapshot/particles.ts';
import { hernquist } from './hernquist.ts';
import { drawMasses, normaliseMasses, requireMassRange, SALPETER_SLOPE } from './masses.ts';
import { plummer } from './plummer.ts';
import { drawBodies, type SampledModel } from './sampling.ts';
import { shift } from './scaling.ts';
import { uniform } from './uniform.ts';

/** The models by name, each with closed forms in units of G = M = a = 1. */
export const MODELS = { plummer, hernquist, uniform } as const satisfies Record<
  string,
  SampledModel
>;

export type ModelName = keyof typeof MODELS;

export interface MakeOptions {
  readonly model: ModelName;
  readonly count: number;
  /** Whole number from 0 to 2^53 − 1; the same seed gives the same bodies, bit for bit. */
  readonly seed: number;
  /** The model's scale radius a, for `uniform` its radius [length]; 1 if not given. */
  readonly scaleRadius?: number;
  /** Mass of the whole model, before `cut` [mass]; 1 if not given. */
  readonly mass?: number;
  /** `salpeter` draws masses from m^−2.35, independent of position; `equal` if not given. */
  readonly masses?: 'equal' | 'salpeter';
  /** Least and greatest mass of `salpeter`, of which only the ratio matters; 0.1 to 10 if not given. */
  readonly massRange?: readonly [number, number];
  /**
   * Nothing is drawn beyond this radius [length]. The bodies inside keep the mass and the velocities
   * they have in the whole model: they add up to mass · M(cut).
   */
  readonly cut?: number;
  /** Added to all positions [length] and all velocities [velocity] at the end. */
  readonly offset?: readonly [number, number, number];
  readonly velocity?: readonly [number, number, number];
  /** Constant of gravitation in the units wanted; velocities go as √(G M / a). 1 if not given. */
  readonly gravity?: number;
  /** Columns of single precision. */
  readonly float32?: boolean;
}

/** Bodies that share one random stream: the cut of the work, which fixes the result whoever does it. */
const BODIES_PER_STREAM = 65536;

/**
 * Draws `count` independent bodies from a model in equilibrium, at time 0.
 *
 * Positions and velocities are as drawn: centre of mass and mean velocity differ from 0, and 2T/|W|
 * from 1, by the noise of a sample. See {@link recentre} and {@link virialScaling}.
 * @throws UsageError `usage.model`, `usage.modelOption`, `usage.massRange`, `usage.seed`
 */
export function makeModel(options: MakeOptions): Particles {
  const model = modelNamed(options.model);
  const { count, scaleRadius = 1, mass: wholeMass = 1, gravity = 1, cut } = options;
  if (!(Number.isInteger(count) && count >= 1 && count < 2 ** 32)) {
    throw optionError('count', count, 'a whole number from 1 to 4294967295');
  }
  for (const [name, value] of Object.entries({ scaleRadius, mass: wholeMass, gravity, cut })) {
    if (value !== undefined && !(value > 0 && Number.isFinite(value))) {
      throw optionError(name, value, 'a finite number above 0');
    }
  }
  const { offset = [0, 0, 0], velocity = [0, 0, 0], masses = 'equal' } = options;
  for (const [name, vector] of Object.entries({ offset, velocity })) {
    if (vector.length !== 3 || !vector.every(Number.isFinite)) {
      throw optionError(name, vector.join(' '), 'three finite numbers');
    }
  }
  if (masses !== 'equal' && masses !== 'salpeter') {
    throw optionError('masses', masses, 'equal or salpeter');
  }
  const law = { slope: SALPETER_SLOPE, range: options.massRange ?? ([0.1, 10] as const) };
  requireMassRange(law.range);

  const massFraction = cut === undefined ? 1 : model.enclosedMass(cut / scaleRadius);
  const type = options.float32 ? 'float32' : 'float64';
  const column = () => allocateColumn(count, type);
  const mass = column();
  const target = {
    x: column(),
    y: column(),
    z: column(),
    vx: column(),
    vy: column(),
    vz: column(),
    lengthScale: scaleRadius,
    velocityScale: Math.sqrt((gravity * wholeMass) / scaleRadius),
  };
  const drawnMass = masses === 'salpeter' ? new Float64Array(count) : null;

  let bodies = new Random(options.seed);
  // Masses have a family of their own, so that a seed gives the same positions with any masses.
  let massDraws = bodies.family(1);
  for (let begin = 0; begin < count; begin += BODIES_PER_STREAM) {
    const end = Math.min(count, begin + BODIES_PER_STREAM);
    drawBodies(model, bodies.stream(0), massFraction, target, begin, end);
    bodies = bodies.stream(1);
    if (drawnMass !== null) {
      drawMasses(law, massDraws.stream(0), drawnMass, begin, end);
      massDraws = massDraws.stream(1);
    }
  }
  const totalMass = wholeMass * massFraction;
  if (drawnMass === null) mass.fill(totalMass / count);
  else normaliseMasses(drawnMass, totalMass, mass);

  const { x, y, z, vx, vy, vz } = target;
  const particles: Particles = {
    count,
    mass,
    x,
    y,
    z,
    vx,
    vy,
    vz,
    columns: {},
    componentNames: [],
    time: 0,
    units: null,
    gravity,
    softening: null,
    frame: { kind: 'physical' },
    origin: {
      file: model.name,
      format: 'made',
      mantissaBits: type === 'float64' ? 53 : 24,
      remarks: [],
    },
  };
  shift(particles, offset, velocity);
  requireRange(particles);
  return particles;
}

function modelNamed(name: string): SampledModel {
  if (Object.hasOwn(MODELS, name)) return MODELS[name as ModelName];
  throw new UsageError(
    'usage.model',
    `The model is "${name}", but must be one of ${Object.keys(MODELS).join(', ')}.`,
    'Give the name of a known model.',
  );
}

function optionError(name: string, found: number | string, expected: string): UsageError {
  return new UsageError(
    'usage.modelOption',
    `The option ${name} of the model is ${found}, but must be ${expected}.`,
    `Correct ${name}.`,
  );
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
