/** One file → one record: reading, measuring, and the time each took. */
import { reusingMemory } from '../numerics/reuse.ts';
import { measureParticles } from '../dynamics/measure.ts';
import type { MeasureRecord } from '../dynamics/record.ts';
import type { MeasureOptions } from '../dynamics/settings.ts';
import type { Crew } from '../parallel/crew.ts';
import type { Particles, Remark } from '../snapshot/particles.ts';
import { readSnapshot } from '../snapshot/read.ts';
import type { FieldName, ReadOptions } from '../snapshot/reading.ts';
import { BYTES_OF_FILE_FORCES, BYTES_OF_LENGTHS, requireMemory } from './memory.ts';
import { prepareSnapshots, type PreparedSnapshot } from './prepare.ts';
import type { StatedTime, TimeSettings } from './times.ts';

/** Stages of one snapshot, for progress; `together` stands for several small ones at once. */
export type Stage = 'together' | 'reading' | 'tree' | 'forces' | 'error' | 'dynamics';

export interface SurveyOptions extends MeasureOptions, TimeSettings {
  readonly read?: ReadOptions;
  /**
   * Run file whose defaults stand below these options; false for none. If not given, it is
   * `settlemark.json` in the folder of the snapshot, if there is one.
   */
  readonly runFile?: string | false;
  /** Called when a stage begins and, while reading, as bytes come in. */
  readonly onStage?: (stage: Stage, fraction: number | null) => void;
}

/**
 * Reads one snapshot and measures it.
 * @param snapshot - a file, `-` for an Arrow stream on standard input, or a prepared snapshot, whose
 *   own options count then: of `options` only progress and signal are used
 * @throws InputError if the file cannot be read or used or will not fit into memory, UsageError for
 *   options that contradict it, or for its run file
 */
export async function measureFile(
  snapshot: string | PreparedSnapshot,
  options: SurveyOptions,
  crew: Crew,
): Promise<MeasureRecord> {
  const [prepared] =
    typeof snapshot === 'string' ? await prepareSnapshots([snapshot], options) : [snapshot];
  return measurePrepared(prepared, options, crew);
}

/** {@link measureFile} for a snapshot whose options are settled. */
export async function measurePrepared(
  { file, parts, options, runFile, time, remarks }: PreparedSnapshot,
  watch: Pick<SurveyOptions, 'read' | 'onStage'>,
  crew: Crew,
): Promise<MeasureRecord> {
  const start = performance.now();
  watch.onStage?.('reading', null);
  const { signal } = watch.read ?? {};
  const read: ReadOptions = {
    ...options.read,
    optional: columnsFor(options),
    ...(signal !== undefined && { signal }),
    onProgress: (done, total) => {
      watch.read?.onProgress?.(done, total);
      watch.onStage?.('reading', total > 0 ? done / total : null);
    },
  };
  return reusingMemory(async () => {
    const { softening = 0, forces } = options;
    const softened = softening === 'column' || softening > 0;
    const moreBytes =
      (forces === 'file' ? BYTES_OF_FILE_FORCES : 0) +
      (softening === 'column' ? BYTES_OF_LENGTHS : 0);
    await requireMemory({ file, parts }, options.read ?? {}, softened, moreBytes);
    const particles = told(await readSnapshot(file, read, crew), time, remarks);
    const readSeconds = (performance.now() - start) / 1000;
    const { onStage } = watch;
    return measureParticles(particles, options, crew, { readSeconds, onStage, runFile, time });
  });
}

/** Columns to read besides those that are read anyway. */
function columnsFor({ read, forces, softening }: PreparedSnapshot['options']): FieldName[] {
  const ofForces: FieldName[] = forces === 'file' ? ['potential', 'acceleration'] : [];
  const ofSoftening: FieldName[] = softening === 'column' ? ['softening'] : [];
  return [...new Set([...(read?.optional ?? []), ...ofForces, ...ofSoftening])];
}

/** Agreement of two statements of a time: single precision, with room. */
const SAME_TIME = 1e-6;

/** Particles with the remarks that were made before they were read, and one if their time is another. */
function told(particles: Particles, time: StatedTime | null, before: readonly Remark[]): Particles {
  const { origin, time: own } = particles;
  const remarks = [...origin.remarks, ...before];
  const value = time?.value ?? own;
  if (own !== null && value !== null && time !== null) {
    const scale = Math.max(Math.abs(own), Math.abs(value));
    if (Math.abs(own - value) > SAME_TIME * scale) {
      remarks.push({
        code: 'time.differs',
        text: `${origin.file} says that its time is ${own}; ${value} was used (${time.source})`,
        remedy: 'Look which of the two is meant.',
      });
    }
  }
  return { ...particles, time: value, origin: { ...origin, remarks } };
}
