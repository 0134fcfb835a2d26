/** The unit system of a record, from its settings. */
import { UNIT_SYSTEMS, type UnitSystem } from '../snapshot/units.ts';
import type { MeasureRecord } from './record.ts';

/** The system that the figures of a record are in; `natural` for a name that is not known. */
export function recordUnits(record: MeasureRecord): UnitSystem {
  const known = UNIT_SYSTEMS as Readonly<Record<string, UnitSystem>>;
  const { value: name, system } = record.settings.units;
  if (system !== undefined) return { name: 'own', ...system };
  return Object.hasOwn(known, name) ? known[name] : UNIT_SYSTEMS.natural;
}
