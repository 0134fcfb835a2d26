/**
 * The registry of quantities: every figure of the record with its key, dimension, error, text and
 * source. Schemas, docs, table heads, names in rules, axes and unit conversion all come from it.
 */
import type { Dimension } from '../snapshot/units.ts';

export interface Quantity {
  /** Path in the record. `virialRatio` alone is short for `whole.virialRatio`. */
  readonly key: string;
  readonly kind: 'number' | 'integer' | 'vector' | 'list';
  /** Powers of mass, length and time; all 0 for a pure number. */
  readonly dimension: Dimension;
  /** Key of its 1σ error, if it has one of its own. */
  readonly error: string | null;
  /** True if the figure may be null; a remark then says why. */
  readonly nullable: boolean;
  readonly needs: readonly ('velocities' | 'forces' | 'neighbours')[];
  /** One line for people. */
  readonly text: string;
  readonly source: string;
}

const dimension = (mass: number, length: number, time: number): Dimension => ({
  mass,
  length,
  time,
});
const NUMBER = dimension(0, 0, 0);
const MASS = dimension(1, 0, 0);
const LENGTH = dimension(0, 1, 0);
const TIME = dimension(0, 0, 1);
const VELOCITY = dimension(0, 1, -1);
const ENERGY = dimension(1, 2, -2);

type Rest = Partial<Pick<Quantity, 'kind' | 'error' | 'nullable' | 'needs'>>;

function quantity(
  key: string,
  dimensions: Dimension,
  text: string,
  source: string,
  rest: Rest = {},
): Quantity {
  return {
    key,
    dimension: dimensions,
    text,
    source,
    kind: 'number',
    error: null,
    nullable: false,
    needs: [],
    ...rest,
  };
}

const TEXTBOOK = 'Binney & Tremaine 2008, Galactic Dynamics';
const OURS = 'derived in docs/methods.md';

function balance(set: string, whose: string): Quantity[] {
  const key = (name: string) => `${set}.${name}`;
  const forces: Rest = { needs: ['forces'] };
  const both: Rest = { needs: ['velocities', 'forces'] };
  return [
    quantity(key('particles'), NUMBER, `number ${whose}`, 'count', { kind: 'integer' }),
    quantity(key('mass'), MASS, `mass ${whose}`, 'sum'),
    quantity(
      key('kinetic'),
      ENERGY,
      `kinetic energy T ${whose}, about their own mean velocity`,
      TEXTBOOK,
      { needs: ['velocities'] },
    ),
    quantity(
      key('potential'),
      ENERGY,
      `potential energy U ${whose}, every pair once, softened as stated`,
      TEXTBOOK,
      { ...forces, error: key('potentialError') },
    ),
    quantity(key('potentialError'), ENERGY, '1σ error of U, measured in the run', OURS, forces),
    quantity(
      key('clausius'),
      ENERGY,
      `Clausius virial W = Σ m x·a ${whose}; equals U without softening`,
      'Clausius 1870, Phil. Mag. 40, 122',
      { ...forces, error: key('clausiusError') },
    ),
    quantity(key('clausiusError'), ENERGY, '1σ error of W, measured in the run', OURS, forces),
    quantity(key('energy'), ENERGY, 'total energy T + U', TEXTBOOK, {
      ...both,
      error: key('potentialError'),
    }),
    quantity(key('virialRatio'), NUMBER, 'virial ratio 2T/|U|', TEXTBOOK, {
      ...both,
      nullable: true,
      error: key('noise'),
    }),
    quantity(
      key('clausiusRatio'),
      NUMBER,
      'virial ratio 2T/|W|, 1 in equilibrium for any softening',
      TEXTBOOK,
      { ...both, nullable: true, error: key('noise') },
    ),
    quantity(
      key('noise'),
      NUMBER,
      'rms that finite N alone gives the ratio over independent realisations',
      OURS,
      { ...both, nullable: true },
    ),
  ];
}

function lagrangian(set: string, whose: string): Quantity[] {
  const list: Rest = { kind: 'list' };
  return [
    quantity(`${set}.fractions`, NUMBER, `mass fractions ${whose}`, 'setting', list),
    quantity(`${set}.radii`, LENGTH, `radii about the centre that hold them`, 'common practice', {
      ...list,
      nullable: true,
      error: `${set}.errors`,
    }),
    quantity(`${set}.errors`, LENGTH, '1σ sampling errors of the radii', OURS, {
      ...list,
      nullable: true,
    }),
  ];
}

export const QUANTITIES: readonly Quantity[] = [
  quantity('frame.centreOfMass', LENGTH, 'centre of mass', TEXTBOOK, { kind: 'vector' }),
  quantity('frame.meanVelocity', VELOCITY, 'mean velocity, mass weighted', TEXTBOOK, {
    kind: 'vector',
    needs: ['velocities'],
  }),
  quantity(
    'frame.centre',
    LENGTH,
    'centre that radii are about, by the method stated',
    'Casertano & Hut 1985; Power et al. 2003',
    { kind: 'vector', needs: ['neighbours'] },
  ),
  quantity(
    'frame.angularMomentum',
    dimension(1, 2, -1),
    'angular momentum about the centre of mass',
    TEXTBOOK,
    { kind: 'vector', needs: ['velocities'] },
  ),
  ...balance('whole', 'of all bodies'),
  ...balance('bound', 'of the bound bodies'),
  ...lagrangian('lagrangian', 'of the whole mass'),
  ...lagrangian('boundLagrangian', 'of the bound mass'),
  quantity('halfMassRadius', LENGTH, 'radius that holds half of all mass', 'common practice'),
  quantity('virialRadius', LENGTH, 'G M²/(2|U|)', 'Heggie & Mathieu 1986', {
    nullable: true,
    needs: ['forces'],
  }),
  quantity(
    'coreRadius',
    LENGTH,
    'density-squared weighted distance from the centre, √(Σρ²d²/Σρ²)',
    'Casertano & Hut 1985, in the squared form of later work',
    { nullable: true, needs: ['neighbours'] },
  ),
  quantity('velocityDispersion', VELOCITY, 'one-dimensional dispersion √(2T/3M)', TEXTBOOK, {
    needs: ['velocities'],
  }),
  quantity('effectiveNumber', NUMBER, '(Σm)²/Σm²', OURS),
  quantity('momentOfInertia', dimension(1, 2, 0), 'Σ m |x − x_c|²', TEXTBOOK),
  quantity('momentOfInertiaRate', dimension(1, 2, -1), '2 Σ m (x − x_c)·(v − v_c)', TEXTBOOK, {
    needs: ['velocities'],
  }),
  quantity('crossingTime', TIME, '2√2 (r_v³/GM)^½', 'Heggie & Mathieu 1986', {
    nullable: true,
    needs: ['forces'],
  }),
  quantity(
    'relaxation.time',
    TIME,
    'half-mass relaxation time 0.138 N^½ r_h^{3/2}/(m^½ G^½ lnΛ)',
    'Spitzer & Hart 1971, ApJ 164, 399',
    { nullable: true },
  ),
  quantity('relaxation.coulombFactor', NUMBER, 'γ in Λ = γN', 'Giersz & Heggie 1994'),
  quantity('relaxation.coulombLogarithm', NUMBER, 'lnΛ used', 'Giersz & Heggie 1994', {
    nullable: true,
  }),
];

const byKey = new Map(QUANTITIES.map((q) => [q.key, q]));

/** The quantity of a key, or of a short name that means the one of the whole set. */
export function findQuantity(key: string): Quantity | undefined {
  return byKey.get(key) ?? byKey.get(`whole.${key}`);
}
