/** Options about what is read, from the command line to the library. */
import { parseColumns, type ReadOptions } from '../index.ts';

/** As commander gives them; what was not given is undefined. */
export interface ReadingOptions {
  readonly layout?: string | undefined;
  readonly columns?: string | undefined;
  readonly only?: string | undefined;
  readonly group?: number | bigint | undefined;
  readonly within?: number | undefined;
  readonly about?: readonly [number, number, number] | undefined;
}

/** @throws UsageError for `--columns` that cannot be read */
export async function readOptionsOf(
  { columns, ...given }: ReadingOptions,
  signal: AbortSignal,
): Promise<ReadOptions> {
  const stated = Object.fromEntries(
    Object.entries(given).filter(([, value]) => value !== undefined),
  );
  return {
    ...stated,
    ...(columns !== undefined && { columns: await parseColumns(columns) }),
    signal,
  };
}
