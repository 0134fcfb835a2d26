/** The unit of a quantity, for the page. */
import { findQuantity, unitText, type UnitSystem } from '../index.ts';

/** What the registry's dimension of a key is called in these units; empty where there are no symbols. */
export function unitOf(key: string, units: UnitSystem): string {
  const quantity = findQuantity(key);
  return quantity === undefined ? '' : unitText(quantity.dimension, units);
}
