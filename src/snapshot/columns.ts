/** `--columns name=column,…`: which column of the file is meant by which of our names. */
import { InputError, UsageError } from '../errors.ts';
import { nearestName } from '../numerics/nearest.ts';
import { FIELD_NAMES, type FieldName, type ReadOptions } from './reading.ts';

/**
 * Parses `mass=weight,x=px`. `m` stands for `mass`; spaces around names are ignored.
 * @throws UsageError `usage.columns` (not of the form name=column, or a name given twice),
 * `usage.unknownField` (not one of our names; the nearest is offered)
 */
export function parseColumns(text: string): NonNullable<ReadOptions['columns']> {
  const columns: Partial<Record<FieldName, string>> = {};
  for (const part of text.split(',')) {
    const equals = part.indexOf('=');
    const name = part.slice(0, Math.max(0, equals)).trim();
    const column = part.slice(equals + 1).trim();
    if (equals < 0 || name === '' || column === '') {
      throw new UsageError(
        'usage.columns',
        `--columns: found "${part.trim()}"; expected name=column, several separated by commas`,
        'For instance: --columns mass=weight,id=number',
      );
    }
    const field = asFieldName(name);
    if (columns[field] !== undefined) {
      throw new UsageError(
        'usage.columns',
        `--columns: "${name}" is given twice, as "${columns[field]}" and as "${column}"`,
        'Name one column for it.',
      );
    }
    columns[field] = column;
  }
  return columns;
}

function asFieldName(name: string): FieldName {
  if (name === 'm') return 'mass';
  if ((FIELD_NAMES as readonly string[]).includes(name)) return name as FieldName;
  const nearest = nearestName(name, FIELD_NAMES);
  throw new UsageError(
    'usage.unknownField',
    `--columns: "${name}" is not a name that Settlemark knows; expected one of ${FIELD_NAMES.join(', ')}`,
    nearest === null
      ? 'Write our name before the = and the name in the file after it.'
      : `Did you mean "${nearest}"?`,
  );
}

/**
 * The error for a column that `--columns` names and the file does not have: `input.unknownColumn`,
 * with the columns there are and the nearest.
 */
export function unknownColumn(
  file: string,
  field: FieldName,
  column: string,
  available: readonly string[],
): InputError {
  const nearest = nearestName(column, available);
  return new InputError(
    'input.unknownColumn',
    `${file}: --columns takes ${field} from "${column}", but the file has ${
      available.length === 0 ? 'no named columns' : `only ${available.join(', ')}`
    }`,
    nearest === null ? 'Name one of these.' : `Did you mean ${field}=${nearest}?`,
  );
}

/**
 * The error for a column that is needed and that the file does not have under our name:
 * `input.missingColumn`, with the columns there are and the nearest.
 */
export function missingColumn(
  file: string,
  field: FieldName,
  available: readonly string[],
  alternative = '',
): InputError {
  const nearest = nearestName(field, available);
  return new InputError(
    'input.missingColumn',
    `${file}: no column for ${field}; the file has ${
      available.length === 0 ? 'no named columns' : available.join(', ')
    }`,
    (nearest === null
      ? `Say which column it is with --columns ${field}=NAME`
      : `If "${nearest}" is meant: --columns ${field}=${nearest}`) + (alternative || '.'),
  );
}

/** `--only` names a component that is none of those there are. */
export function unknownComponent(file: string, only: string, names: readonly string[]): InputError {
  const nearest = nearestName(only, names);
  return new InputError(
    'input.unknownComponent',
    `${file}: there is no component "${only}"; the file has ${names.slice(0, 20).join(', ')}`,
    nearest === null ? 'Name one of these.' : `Did you mean "${nearest}"?`,
  );
}
