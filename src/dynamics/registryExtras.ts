/** The part of the registry that `--with` adds to a record. */
import type { Dimension } from '../snapshot/units.ts';
import {
  balanceQuantities,
  dimension,
  ENERGY,
  LENGTH,
  MASS,
  NUMBER,
  OURS,
  quantity,
  TEXTBOOK,
  TIME,
  VELOCITY,
  type Quantity,
  type Rest,
} from './quantity.ts';

const SAMPLING = '1σ sampling error';
const PRACTICE = 'common practice';
const HEGGIE = 'Heggie 1975, MNRAS 173, 729';

/** A list and the list of its errors, both with null where a figure cannot be had. */
function listWithErrors(
  key: string,
  dimensions: Dimension,
  text: string,
  source: string,
  rest: Rest,
): Quantity[] {
  const list: Rest = { kind: 'list', nullable: true, ...rest };
  const errors = `${key}Errors`;
  return [
    quantity(key, dimensions, text, source, { ...list, error: errors }),
    quantity(errors, dimensions, `${SAMPLING}s`, OURS, list),
  ];
}

/** A number and its error, either of which may be null. */
function numberWithError(
  key: string,
  dimensions: Dimension,
  text: string,
  source: string,
  rest: Rest,
): Quantity[] {
  const error = `${key}Error`;
  return [
    quantity(key, dimensions, text, source, { nullable: true, ...rest, error }),
    quantity(error, dimensions, SAMPLING, OURS, { nullable: true, ...rest }),
  ];
}

function inertia(): Quantity[] {
  const rest: Rest = { extra: 'inertia', needs: ['velocities', 'forces'] };
  const key = 'momentOfInertiaAcceleration';
  return [
    quantity(
      key,
      ENERGY,
      'd²I/dt² = 4T + 2W, 0 in equilibrium, by the forces between the bodies alone',
      'identity of Lagrange and Jacobi; Binney & Tremaine 2008, section 4.8',
      { ...rest, error: `${key}Noise` },
    ),
    quantity(`${key}Error`, ENERGY, '1σ error from the measured one of W', OURS, rest),
    quantity(`${key}Noise`, ENERGY, 'rms that finite N alone gives it', OURS, {
      ...rest,
      nullable: true,
    }),
  ];
}

function shells(): Quantity[] {
  const rest: Rest = { extra: 'shells', needs: ['velocities'] };
  const key = (name: string) => `shells.${name}`;
  const list: Rest = { ...rest, kind: 'list' };
  return [
    quantity(key('axis'), NUMBER, 'direction of the angular momentum of the set', TEXTBOOK, {
      ...rest,
      kind: 'vector',
      nullable: true,
    }),
    quantity(key('particles'), NUMBER, 'number of bodies in each shell', 'count', {
      ...rest,
      kind: 'integers',
    }),
    quantity(key('mass'), MASS, 'mass of each shell', 'sum', list),
    quantity(key('inner'), LENGTH, 'inner radii of the shells about the centre', PRACTICE, list),
    quantity(key('outer'), LENGTH, 'outer radii', PRACTICE, list),
    quantity(key('radii'), LENGTH, 'radii that halve the bodies of each shell', PRACTICE, list),
    ...listWithErrors(
      key('radialVelocity'),
      VELOCITY,
      'mean radial velocity, outward positive',
      TEXTBOOK,
      rest,
    ),
    ...listWithErrors(
      key('radialDispersion'),
      VELOCITY,
      'radial dispersion about that mean',
      TEXTBOOK,
      rest,
    ),
    ...listWithErrors(
      key('tangentialDispersion'),
      VELOCITY,
      'tangential dispersion of one component, rotation taken out',
      TEXTBOOK,
      rest,
    ),
    ...listWithErrors(
      key('anisotropy'),
      NUMBER,
      'β = 1 − σ_t²/σ_r²: 0 isotropic, 1 radial, below 0 tangential',
      'Binney 1980, MNRAS 190, 873',
      rest,
    ),
    ...listWithErrors(
      key('rotation'),
      VELOCITY,
      'mean azimuthal velocity about the axis',
      TEXTBOOK,
      rest,
    ),
    ...numberWithError(
      'radialToTangential',
      NUMBER,
      '2T_r/T_t of the set, 1 for isotropic velocities',
      'Polyachenko & Shukhman 1981, Soviet Astronomy 25, 533',
      rest,
    ),
  ];
}

function profiles(): Quantity[] {
  const rest: Rest = { extra: 'profiles' };
  const key = (name: string) => `profiles.${name}`;
  const list: Rest = { ...rest, kind: 'list' };
  const density = dimension(1, -3, 0);
  return [
    quantity(
      key('inner'),
      LENGTH,
      'radii that hold a quarter of the bodies of each shell',
      PRACTICE,
      list,
    ),
    quantity(key('radii'), LENGTH, 'radii that halve the bodies of each shell', PRACTICE, list),
    quantity(key('outer'), LENGTH, 'radii that hold three quarters of them', PRACTICE, list),
    ...listWithErrors(
      key('density'),
      density,
      'mean density of that middle half of each shell',
      PRACTICE,
      rest,
    ),
    ...listWithErrors(key('enclosedMass'), MASS, 'mass inside each of radii', 'sum', rest),
    ...listWithErrors(
      key('circularVelocity'),
      VELOCITY,
      '√(G M(r)/r) at each of radii, of a Newtonian sphere',
      TEXTBOOK,
      rest,
    ),
    ...listWithErrors(
      key('escapeVelocity'),
      VELOCITY,
      '√(−2φ) at each of radii, φ that of a Newtonian sphere',
      TEXTBOOK,
      rest,
    ),
    ...listWithErrors(
      key('relaxationTime'),
      TIME,
      'local two-body relaxation time 0.34 σ³/(G² m ρ lnΛ)',
      'Binney & Tremaine 2008, eq. 7.106',
      { ...rest, needs: ['velocities'] },
    ),
    ...numberWithError(key('peakVelocity'), VELOCITY, 'greatest circular velocity', PRACTICE, rest),
    ...numberWithError(key('peakRadius'), LENGTH, 'radius where it is', PRACTICE, rest),
  ];
}

function pairs(): Quantity[] {
  const rest: Rest = { extra: 'pairs', needs: ['velocities', 'forces', 'neighbours'] };
  const key = (name: string) => `hardestPairs.${name}`;
  const list: Rest = { ...rest, kind: 'list' };
  return [
    quantity('hardPairs', NUMBER, 'number of pairs with more than kT of binding energy', HEGGIE, {
      ...rest,
      kind: 'integer',
      nullable: true,
    }),
    quantity('hardPairsEnergy', ENERGY, 'their binding energy in all', HEGGIE, {
      ...rest,
      nullable: true,
    }),
    quantity(key('first'), NUMBER, 'indices of the heavier bodies of the hardest pairs', 'input', {
      ...rest,
      kind: 'integers',
    }),
    quantity(key('second'), NUMBER, 'indices of the other bodies', 'input', {
      ...rest,
      kind: 'integers',
    }),
    quantity(key('firstIds'), NUMBER, 'ids of first; empty if the snapshot has none', 'input', {
      ...rest,
      kind: 'ids',
    }),
    quantity(key('secondIds'), NUMBER, 'ids of second', 'input', {
      ...rest,
      kind: 'ids',
    }),
    quantity(key('separations'), LENGTH, 'distances at this moment', 'input', list),
    quantity(
      key('semiMajorAxes'),
      LENGTH,
      'half the sum of apocentre and pericentre',
      TEXTBOOK,
      list,
    ),
    quantity(
      key('eccentricities'),
      NUMBER,
      'difference of apocentre and pericentre over their sum',
      TEXTBOOK,
      list,
    ),
    quantity(key('energies'), ENERGY, 'binding energies, with the softening', HEGGIE, list),
    quantity(key('hardness'), NUMBER, 'binding energies over the local kT', HEGGIE, {
      ...list,
      error: key('hardnessErrors'),
    }),
    quantity(key('hardnessErrors'), NUMBER, '1σ errors from the sampling of kT', OURS, list),
    ...balanceQuantities('pairsMerged', 'of the bodies, each hard pair as one', { extra: 'pairs' }),
  ];
}

/** In the order of the record. */
export const EXTRA_QUANTITIES: readonly Quantity[] = [
  ...inertia(),
  ...shells(),
  ...profiles(),
  ...pairs(),
];
