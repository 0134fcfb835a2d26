/** `settlemark make`: writes a snapshot of a model. */
import {
  EXIT,
  makeSnapshot,
  UsageError,
  writeSnapshot,
  type ExitCode,
  type ModelName,
  type SofteningKernel,
} from '../index.ts';
import { turn, withCrew } from './crew.ts';
import { short, wholeNumber } from './figure.ts';
import { write, type Streams } from './streams.ts';

export interface MakeCommandOptions {
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

const ARROW_ENDINGS = ['.arrow', '.arrows', '.feather', '.ipc'];
const RAW_ENDINGS = ['.bin', '.raw', '.dat'];

/** Makes the model, scales it if wanted, and writes it. */
export async function make(
  model: string,
  options: MakeCommandOptions,
  streams: Streams,
): Promise<ExitCode> {
  const { format: asked, threads, quiet = false, seed = 1, ...rest } = options;
  const count = required('--count', 'the number of bodies', options.count);
  const out = required('--out', 'the file to write', options.out);
  const format = asked ?? formatByEnding(out);
  await withCrew(threads, streams.interrupt, async (crew) => {
    // The model's name is checked by the library, which knows the models.
    const wanted = { ...rest, count, model: model as ModelName, seed };
    const particles = await makeSnapshot(wanted, crew);
    await turn(streams.interrupt);
    await writeSnapshot(out, particles, format);
  });
  if (!quiet) {
    await write(streams.stderr, summary(model, format, { ...options, count, out, seed }));
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

function formatByEnding(out: string): 'raw' | 'arrow' {
  const name = out.toLowerCase();
  if (ARROW_ENDINGS.some((ending) => name.endsWith(ending))) return 'arrow';
  if (RAW_ENDINGS.some((ending) => name.endsWith(ending))) return 'raw';
  throw new UsageError(
    'usage.format',
    `the ending of --out ${out} does not say which format is wanted; known are ${[...ARROW_ENDINGS, ...RAW_ENDINGS].join(' ')}`,
    'Add --format raw or --format arrow.',
  );
}

/** What was written, and how to measure it where the file itself cannot say. */
function summary(
  model: string,
  format: 'raw' | 'arrow',
  options: MakeCommandOptions & { readonly count: number; readonly out: string },
): string {
  const { out, count, seed, units, gravity, softening, softeningKernel } = options;
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
  const bodies = count === 1 ? '1 body' : `${wholeNumber(count)} bodies`;
  const hint =
    needed.length === 0
      ? ''
      : `  The file does not hold all settings; measure it with ${needed.join(' ')}\n`;
  return `${out}: ${bodies} of a ${model} model, seed ${seed}, ${isRaw ? 'raw float64 mass x y z vx vy vz' : 'Arrow IPC'}\n${hint}`;
}
