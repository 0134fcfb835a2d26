/** A reference of comparisons as a small file for a simulation's repository. */
import { InputError } from '../errors.ts';
import { COMPARED_QUANTITIES, type ComparedRun } from './compareRun.ts';

const MARK = 'comparison/1';

/** Runs as the text of a reference file; figures to twelve digits, which is far below any noise. */
export function referenceText(runs: readonly ComparedRun[]): string {
  const short = (_key: string, value: unknown): unknown =>
    typeof value === 'number' && !Number.isInteger(value) ? Number(value.toPrecision(12)) : value;
  const lines = runs.map((run) => JSON.stringify(run, short));
  return `{"settlemark":"${MARK}","runs":[\n${lines.join(',\n')}\n]}\n`;
}

/** Whether a text is meant as a reference: a JSON object with the program's mark. */
export function looksLikeReference(head: string): boolean {
  return /^\s*\{\s*"settlemark"\s*:\s*"comparison\//.test(head);
}

/**
 * Reads the text of a reference file.
 * @param path - for messages
 * @throws InputError `input.notAReference`, `input.referenceVersion`
 */
export function parseReference(text: string, path: string): ComparedRun[] {
  let value: unknown;
  try {
    value = JSON.parse(text);
  } catch (error) {
    const why = error instanceof Error ? error.message : '';
    throw wrong(path, `it is not JSON: ${why}`);
  }
  if (!isObject(value)) throw wrong(path, 'it is not an object');
  if (value['settlemark'] !== MARK) {
    throw new InputError(
      'input.referenceVersion',
      `${path}: a reference of the form ${JSON.stringify(value['settlemark']) ?? 'none'}; this Settlemark knows "${MARK}"`,
      'store the reference again with `settlemark compare … --store FILE`',
    );
  }
  const { runs } = value;
  if (!Array.isArray(runs) || runs.length === 0) throw wrong(path, 'it has no "runs"');
  return runs.map((run: unknown, k) => {
    const problem = problemOf(run);
    if (problem !== null) throw wrong(path, `runs[${k}]: ${problem}`);
    return run as ComparedRun;
  });
}

function problemOf(run: unknown): string | null {
  if (!isObject(run)) return 'it is not an object';
  const { name, setup, crossingTime, sampling, times, values } = run;
  if (typeof name !== 'string') return '"name" is no text';
  if (!isObject(setup)) return '"setup" is missing';
  for (const key of ['particles', 'effectiveNumber', 'mass', 'gravity']) {
    if (!isNumber(setup[key])) return `"setup.${key}" is no number`;
  }
  if (typeof setup['units'] !== 'string') return '"setup.units" is no text';
  const { softening } = setup;
  if (
    !isObject(softening) ||
    !isNumber(softening['length']) ||
    typeof softening['kernel'] !== 'string'
  )
    return '"setup.softening" is not { length, kernel }';
  if (crossingTime !== null && !isNumber(crossingTime)) return '"crossingTime" is no number';
  if (!isObject(sampling)) return '"sampling" is missing';
  for (const key of ['inner', 'half']) {
    if (sampling[key] !== null && !isNumber(sampling[key])) return `"sampling.${key}" is no number`;
  }
  if (!isNumbers(times) || times.length === 0) return '"times" is no list of numbers';
  if (times.some((time, k) => k > 0 && time <= times[k - 1])) return '"times" do not rise';
  if (!isObject(values)) return '"values" is missing';
  for (const [key, column] of Object.entries(values)) {
    if (!COMPARED_QUANTITIES.some((quantity) => quantity.key === key))
      return `"values" has ${JSON.stringify(key)}, which is not compared`;
    if (!isNumbers(column) || column.length !== times.length)
      return `"values.${key}" is no list of ${times.length} numbers`;
  }
  return null;
}

const isObject = (value: unknown): value is Record<string, unknown> =>
  value !== null && typeof value === 'object' && !Array.isArray(value);
const isNumber = (value: unknown): value is number =>
  typeof value === 'number' && Number.isFinite(value);
const isNumbers = (value: unknown): value is number[] =>
  Array.isArray(value) && value.every(isNumber);

function wrong(path: string, why: string): InputError {
  return new InputError(
    'input.notAReference',
    `${path}: not a reference of runs: ${why}`,
    'give a file that `settlemark compare … --store FILE` wrote',
  );
}
