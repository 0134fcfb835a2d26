/** One file → one record: reading, measuring, and the time each took. */
import { reusingMemory } from '../numerics/reuse.ts';
import { measureParticles } from '../dynamics/measure.ts';
import type { MeasureRecord } from '../dynamics/record.ts';
import type { MeasureOptions } from '../dynamics/settings.ts';
import type { Crew } from '../parallel/crew.ts';
import { loadUnits } from '../snapshot/ownUnits.ts';
import { readSnapshot } from '../snapshot/read.ts';
import type { ReadOptions } from '../snapshot/reading.ts';
import { requireMemory } from './memory.ts';

/** Stages of one snapshot, for progress; `together` stands for several small ones at once. */
export type Stage = 'together' | 'reading' | 'tree' | 'forces' | 'error' | 'dynamics';

export interface SurveyOptions extends MeasureOptions {
  readonly read?: ReadOptions;
  /** Called when a stage begins and, while reading, as bytes come in. */
  readonly onStage?: (stage: Stage, fraction: number | null) => void;
}

/**
 * Reads one snapshot and measures it.
 * @param path - a file, or `-` for an Arrow stream on standard input
 * @throws InputError if the file cannot be read or used or will not fit into memory, UsageError for options that contradict it
 */
export async function measureFile(
  path: string,
  options: SurveyOptions,
  crew: Crew,
): Promise<MeasureRecord> {
  const start = performance.now();
  options.onStage?.('reading', null);
  const read: ReadOptions = {
    ...options.read,
    onProgress: (done, total) => {
      options.read?.onProgress?.(done, total);
      options.onStage?.('reading', total > 0 ? done / total : null);
    },
  };
  return reusingMemory(async () => {
    await requireMemory(path, options.read ?? {}, (options.softening ?? 0) > 0);
    const particles = await readSnapshot(path, read, crew);
    const readSeconds = (performance.now() - start) / 1000;
    const settled: MeasureOptions =
      options.units === undefined ? options : { ...options, units: await loadUnits(options.units) };
    return measureParticles(particles, settled, crew, { readSeconds, onStage: options.onStage });
  });
}
