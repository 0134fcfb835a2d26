/**
 * The registry of quantities: every figure of the record with its key, dimension, error, text and
 * source. Schemas, docs, table heads, names in rules, axes and unit conversion all come from it.
 */
import {
  balanceQuantities,
  dimension,
  LENGTH,
  NUMBER,
  OURS,
  quantity,
  TEXTBOOK,
  TIME,
  VELOCITY,
  type Quantity,
  type Rest,
} from './quantity.ts';
import { EXTRA_QUANTITIES } from './registryExtras.ts';

export type { Quantity } from './quantity.ts';

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
  ...balanceQuantities('whole', 'of all bodies'),
  ...balanceQuantities('bound', 'of the bound bodies'),
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
  ...EXTRA_QUANTITIES,
];

const byKey = new Map(QUANTITIES.map((q) => [q.key, q]));

/** The quantity of a key, or of a short name that means the one of the whole set. */
export function findQuantity(key: string): Quantity | undefined {
  return byKey.get(key) ?? byKey.get(`whole.${key}`);
}
