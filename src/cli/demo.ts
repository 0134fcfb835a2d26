/** `settlemark demo`: two measurements and a small run, told in plain words. */
import { mkdir } from 'node:fs/promises';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import {
  averageBalance,
  EXIT,
  findSnapshots,
  InputError,
  makeSnapshot,
  measureFiles,
  measureSnapshot,
  type Crew,
  type ExitCode,
  type MeasureRecord,
  writeSnapshot,
} from '../index.ts';
import { collapse, EMBER_SNAPSHOTS } from './demoCollapse.ts';
import { turn, withCrew } from './crew.ts';
import { duration, figure, short, significant, wholeNumber } from './figure.ts';
import { wrap } from './layout.ts';
import { startProgress, type Progress } from './progress.ts';
import { ratioWords } from './ratioWords.ts';
import { paintFor, type Paint } from './style.ts';
import { write, type Streams } from './streams.ts';

export interface DemoOptions {
  readonly quiet?: boolean;
  readonly threads?: number;
  /** Folder that keeps the snapshots of the run. */
  readonly out?: string;
}

/** Real epochs of the Sun and its planets; part of the package. */
const SOLAR = fileURLToPath(new URL('../../fixtures/solar/raw/', import.meta.url));
const STARS = 100_000;
const SEED = 7;

export async function demo(options: DemoOptions, streams: Streams): Promise<ExitCode> {
  const paint = paintFor(streams.stdout, streams.env);
  await withCrew(options.threads, streams.interrupt, async (crew) => {
    const progress = startProgress(streams.stderr, options.quiet === true, crew);
    try {
      await write(streams.stdout, await solarSystem(crew, progress, streams, paint));
      await write(streams.stdout, await shoal(crew, progress, paint));
      await write(streams.stdout, await drift(crew, progress, options, streams, paint));
    } finally {
      progress.close();
    }
  });
  return EXIT.done;
}

async function solarSystem(
  crew: Crew,
  progress: Progress,
  streams: Streams,
  paint: Paint,
): Promise<string> {
  const records: MeasureRecord[] = [];
  const files = await solarFiles();
  for await (const { record, error } of await measureFiles(files, {}, crew)) {
    await turn(streams.interrupt);
    progress.say('the solar system over twelve years', records.length / files.length);
    if (error !== null) throw error;
    records.push(record);
  }
  progress.clear();
  const average = await averageBalance(records);
  const off = average.clausiusRatio - 1;
  const swing = 100 * Math.max(average.largest - 1, 1 - average.smallest);
  const lines = [
    paint.strong('1. Nine real bodies: the Sun and its planets'),
    wrap(
      `${average.records} snapshots, one every 30 days over ${short(average.to - average.from, 3)} years. At single moments 2T/|U| lies anywhere from ${significant(average.smallest, 4)} to ${significant(average.largest, 4)}: the planets, above all Jupiter, come nearer to the Sun and go away again, and a swing of ${short(swing, 1)} % says nothing about balance.`,
      '   ',
    ),
    wrap('The virial theorem speaks of averages over time, and they agree with it:', '   '),
    '',
    `   2<T>/|<U>|   ${paint.good(significant(average.clausiusRatio, 6))}`,
    `   expected     ${significant(average.expectedRatio, 6)}`,
    '',
    wrap(
      `The expected value is off 1 by ${short(100 * (average.expectedRatio - 1), 2)} % because the outer planets have not come full circle in that time; the measured one is off 1 by ${short(100 * off, 2)} %. Nothing was fitted: masses, places and velocities went in, nothing else.`,
      '   ',
    ),
  ];
  return `${lines.join('\n')}\n\n`;
}

async function solarFiles(): Promise<string[]> {
  try {
    return await findSnapshots([SOLAR]);
  } catch (error) {
    throw new InputError(
      'input.demoMissing',
      `the demo's snapshots of the solar system are not in ${SOLAR}`,
      'Install Settlemark again: they are part of it.',
      { cause: error },
    );
  }
}

async function shoal(crew: Crew, progress: Progress, paint: Paint): Promise<string> {
  const name = 'the Lantern Shoal';
  const particles = await makeSnapshot({ model: 'plummer', count: STARS, seed: SEED }, crew);
  const record = await measureSnapshot(
    particles,
    { onStage: (stage, fraction) => progress.stage(name, stage, fraction) },
    crew,
  );
  progress.clear();
  const { whole, bound, engine } = record;
  const { name: ratioName, figure: ratio, words, tone } = ratioWords(record);
  const half = record.lagrangian.fractions.indexOf(0.5);
  const lost = whole.particles - bound.particles;
  const lines = [
    paint.strong(`2. A made star cluster: the Lantern Shoal, ${wholeNumber(STARS)} stars`),
    wrap(
      "Drawn at random from Plummer's sphere (total mass 1, scale radius 1, G = 1), a model in perfect equilibrium. What Settlemark finds, without being told what it is:",
      '   ',
    ),
    '',
    `   T            ${figure(whole.kinetic)}`,
    `   U           ${figure(whole.potential, whole.potentialError)}   (the error is measured, not assumed)`,
    `   ${ratioName}       ${paint.strong(ratio)}`,
    `                ${paint[tone](words)}`,
    `   bound        ${lost === 0 ? 'all stars' : `all but ${wholeNumber(lost)} of the stars`}`,
    `   half-mass    ${figure(record.halfMassRadius, record.lagrangian.errors[half] ?? null)}   (the model's: 1.30477)`,
    '',
    wrap(
      `"Finite N" is how far the ratio of ${wholeNumber(STARS)} stars drawn from a perfect model strays from 1 by chance. U has ${wholeNumber((STARS * (STARS - 1)) / 2)} pairs; ${engine.origin === 'tree' ? `a tree took them together in ${duration(engine.seconds.tree + engine.seconds.forces)}, and ${duration(engine.seconds.error)} went into measuring how good that is` : `all were summed in ${duration(engine.seconds.forces)}`} (${engine.threads} thread${engine.threads === 1 ? '' : 's'}).`,
      '   ',
    ),
  ];
  return `${lines.join('\n')}\n\n`;
}

async function drift(
  crew: Crew,
  progress: Progress,
  { out }: DemoOptions,
  streams: Streams,
  paint: Paint,
): Promise<string> {
  if (out !== undefined) await makeFolder(out);
  const text = await collapse(
    crew,
    async (particles, done) => {
      await turn(streams.interrupt);
      progress.say('the Ember Drift falls together', done / EMBER_SNAPSHOTS);
      if (out === undefined) return;
      const number = String(done - 1).padStart(2, '0');
      await writeSnapshot(join(out, `drift-${number}.arrow`), particles, 'arrow');
    },
    paint,
  );
  progress.clear();
  const lines = [
    text,
    '',
    paint.strong('By hand'),
    `   settlemark make plummer --count ${STARS} --seed ${SEED} --out shoal.arrow`,
    '   settlemark measure shoal.arrow',
    ...(out === undefined
      ? ['   settlemark demo --out drift     (keeps the snapshots of the run)']
      : []),
    `   settlemark measure ${out ?? 'drift'}`,
  ];
  return `${lines.join('\n')}\n`;
}

async function makeFolder(path: string): Promise<void> {
  try {
    await mkdir(path, { recursive: true });
  } catch (error) {
    const reason = error instanceof Error ? error.message : String(error);
    throw new InputError(
      'input.cannotWrite',
      `${path}: ${reason}`,
      'name a folder that can be made or written to',
      { cause: error },
    );
  }
}
