/** `settlemark make`: writes a snapshot of a model. */
import {
  EXIT,
  makeSnapshot,
  modelFigures,
  UsageError,
  writeSnapshot,
  type ExitCode,
  type ModelName,
  type Particles,
  type SofteningKernel,
} from '../index.ts';
import { turn, withCrew } from './crew.ts';
import { short, significant, wholeNumber } from './figure.ts';
import type { ModelCommandOptions } from './makeOptions.ts';
import { given, meetingOf, sphereOf, type Sphere } from './makeSpheres.ts';
import { write, type Streams } from './streams.ts';

export interface MakeCommandOptions extends ModelCommandOptions {
  readonly count?: number;
  readonly seed?: number;
  readonly virialRatio?: number;
  readonly masses?: 'equal' | 'salpeter';
  readonly cut?: number;
  readonly offset?: readonly [number, number, number];
  readonly velocity?: readonly [number, number, number];
  readonly scaleRadius?: number;
  readonly mass?: number;
  readonly units?: string;
  readonly gravity?: number;
  readonly softening?: number;
  readonly softeningKernel?: SofteningKernel;
  readonly format?: 'raw' | 'arrow';
  readonly out?: string;
  readonly threads?: number;
  readonly quiet?: boolean;
}

const SETTINGS = [
  'offset',
  'velocity',
  'units',
  'gravity',
  'virialRatio',
  'softening',
  'softeningKernel',
] as const;

/** Makes the model, scales it if wanted, and writes it. */
export async function make(
  model: string,
  options: MakeCommandOptions,
  streams: Streams,
): Promise<ExitCode> {
  const { format: asked, threads, quiet = false, seed = 1 } = options;
  const count = required('--count', 'the number of bodies', options.count);
  const out = required('--out', 'the file to write', options.out);
  const format = asked ?? (await formatOf(out));
  // The model's name is checked by the library, which knows the models.
  const sphere = sphereOf({ ...options, count, model: model as ModelName });
  const meeting = meetingOf(options, sphere);
  let particles: Particles | undefined;
  await withCrew(threads, streams.interrupt, async (crew) => {
    const settings = given(options, SETTINGS);
    particles = await makeSnapshot({ ...sphere, ...meeting, ...settings, seed }, crew);
    await turn(streams.interrupt);
    await writeSnapshot(out, particles, format);
  });
  if (!quiet && particles !== undefined) {
    await write(streams.stderr, heading(out, particles, seed, format));
    await write(streams.stderr, await figures(sphere, particles.gravity ?? 1, options));
    await write(streams.stderr, hint(format, particles, options));
  }
  return EXIT.done;
}

function required<T>(option: string, meaning: string, value: T | undefined): T {
  if (value !== undefined) return value;
  throw new UsageError(
    'usage.missingOption',
    `make needs ${option}, ${meaning}`,
    'For instance: settlemark make plummer --count 10000 --out sphere.arrow',
  );
}

async function formatOf(out: string): Promise<'raw' | 'arrow'> {
  const { ARROW_ENDINGS, formatByEnding, RAW_ENDINGS } = await import('../snapshot/endings.ts');
  const format = formatByEnding(out);
  if (format !== null) return format;
  throw new UsageError(
    'usage.format',
    `the ending of --out ${out} does not say which format is wanted; known are ${[...ARROW_ENDINGS, ...RAW_ENDINGS].join(' ')}`,
    'Add --format raw or --format arrow.',
  );
}

function heading(
  out: string,
  { count, componentNames, columns, origin }: Particles,
  seed: number,
  format: 'raw' | 'arrow',
): string {
  const bodies = count === 1 ? '1 body' : `${wholeNumber(count)} bodies`;
  const parts = componentNames.map((name, k) => {
    const own = columns.component?.reduce((sum, component) => sum + (component === k ? 1 : 0), 0);
    return `${wholeNumber(own ?? 0)} ${name}`;
  });
  const what = parts.length === 0 ? `of a ${origin.file} model` : `(${parts.join(', ')})`;
  const bytes = format === 'raw' ? 'raw float64 mass x y z vx vy vz' : 'Arrow IPC';
  return `${out}: ${bodies} ${what}, seed ${seed}, ${bytes}\n`;
}

/** What the model has by its formulas, before noise and everything that is done to it later. */
async function figures(
  sphere: Sphere,
  gravity: number,
  { companion }: MakeCommandOptions,
): Promise<string> {
  const { potential, virialRatio, halfMassRadius } = await modelFigures(sphere, gravity);
  const owner = companion === undefined ? 'the model itself' : 'the first model itself';
  const energy =
    potential === null || virialRatio === null
      ? 'U infinite'
      : `U ${significant(potential)}, 2T/|U| ${short(virialRatio, 5)}`;
  return `  ${owner}: half-mass radius ${significant(halfMassRadius)}, ${energy}\n`;
}

/** How to measure it where the file itself cannot say. */
function hint(
  format: 'raw' | 'arrow',
  { componentNames }: Particles,
  { units, gravity, softening, softeningKernel }: MakeCommandOptions,
): string {
  const isRaw = format === 'raw';
  const needed = [
    isRaw && units !== undefined ? `--units ${units}` : '',
    isRaw && gravity !== undefined ? `--gravity ${short(gravity, 17)}` : '',
    softening !== undefined && softening > 0 && (isRaw || softeningKernel === 'spline')
      ? `--softening ${short(softening, 17)}`
      : '',
    softeningKernel !== undefined && softeningKernel === 'spline'
      ? `--softening-kernel ${softeningKernel}`
      : '',
  ].filter((option) => option !== '');
  const settings =
    needed.length === 0
      ? ''
      : `  The file does not hold all settings; measure it with ${needed.join(' ')}\n`;
  const components =
    isRaw && componentNames.length > 0
      ? '  The file does not tell components apart; an Arrow file does.\n'
      : '';
  return settings + components;
}
