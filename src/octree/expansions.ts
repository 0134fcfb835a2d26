/** The expansions that a softening takes. */
import { expansionOf, type Expansion } from './expansion.ts';
import { isOfEach, type Softening } from './softening.ts';
import { spreadExpansionOf, type SpreadExpansion } from './spreadExpansion.ts';

export interface Expansions {
  readonly plain: Expansion;
  /** Terms beyond the plain ones, where bodies have Plummer lengths of their own; else null. */
  readonly ofSpread: SpreadExpansion | null;
  /** Reals a node of multipoles and of local coefficients, in all. */
  readonly multipoles: number;
  readonly locals: number;
}

/** Expansions of the order p ≥ 1: Newtonian but with Plummer's kernel. */
export function expansionsFor(order: number, softening: Softening): Expansions {
  const isPlummer = softening.kernel === 'plummer';
  const plain = expansionOf(order, isPlummer);
  const ofSpread = isPlummer && isOfEach(softening) ? spreadExpansionOf(order) : null;
  const { multipoles, locals } = ofSpread ?? plain;
  return { plain, ofSpread, multipoles, locals };
}
