/** What the registry says of one quantity, and what its entries are written with. */
import type { Dimension } from '../snapshot/units.ts';
import type { ExtraName } from './extras.ts';

export interface Quantity {
  /** Path in the record. `virialRatio` alone is short for `whole.virialRatio`. */
  readonly key: string;
  readonly kind: 'number' | 'integer' | 'vector' | 'list' | 'integers' | 'ids';
  /** Powers of mass, length and time; all 0 for a pure number. */
  readonly dimension: Dimension;
  /** Key of its 1σ error, if it has one of its own. */
  readonly error: string | null;
  /** True if the figure may be null; a remark then says why. */
  readonly nullable: boolean;
  readonly needs: readonly ('velocities' | 'forces' | 'neighbours')[];
  /** The name after `--with` that it takes; null for what is always measured. */
  readonly extra: ExtraName | null;
  /** One line for people. */
  readonly text: string;
  readonly source: string;
}

export const dimension = (mass: number, length: number, time: number): Dimension => ({
  mass,
  length,
  time,
});
export const NUMBER = dimension(0, 0, 0);
export const MASS = dimension(1, 0, 0);
export const LENGTH = dimension(0, 1, 0);
export const TIME = dimension(0, 0, 1);
export const VELOCITY = dimension(0, 1, -1);
export const ENERGY = dimension(1, 2, -2);

export type Rest = Partial<Pick<Quantity, 'kind' | 'error' | 'nullable' | 'needs' | 'extra'>>;

export function quantity(
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
    extra: null,
    ...rest,
  };
}

export const TEXTBOOK = 'Binney & Tremaine 2008, Galactic Dynamics';
export const OURS = 'derived in docs/methods.md';

/** The entries of a Balance: the same for the whole, the bound set, and others. */
export function balanceQuantities(set: string, whose: string, rest: Rest = {}): Quantity[] {
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
  ].map((entry) => ({ ...entry, ...rest }));
}
