/** The live view of a run on a terminal: verdict, forecast, small plots with the band of the noise, last notes. */
import type { MeasureRecord } from '../index.ts';
import { terminalPlot } from '../figures/terminalPlot.ts';
import { short } from './figure.ts';
import { PAGE_WIDTH, printable, shorten, wrap } from './layout.ts';
import { asSentence } from './remarks.ts';
import type { OutStream } from './streams.ts';
import type { Paint } from './style.ts';
import { forecastWords, kindOf } from './watchLine.ts';
import type { RunSoFar, Teller } from './watch.ts';

const RATIO_ROWS = 7;
const RADII_ROWS = 5;
const NOTES = 3;
const FRACTIONS = [0.1, 0.5, 0.9];
/** Redrawing more often than this flickers and tells no more [ms]. */
const EVERY_MS = 100;

export class LiveView implements Teller {
  readonly notes: string[] = [];
  readonly #stream: OutStream;
  readonly #paint: Paint;
  #lines = 0;
  #last: RunSoFar | null = null;
  #drawn = 0;
  #isStale = false;

  constructor(stream: OutStream, paint: Paint) {
    this.#stream = stream;
    this.#paint = paint;
  }

  show(run: RunSoFar): Promise<void> {
    // While many are caught up with, the verdict before stays on the screen.
    const { verdict, forecast } = run.verdict === null ? (this.#last ?? run) : run;
    this.#last = { ...run, verdict, forecast };
    this.#draw(performance.now() - this.#drawn > EVERY_MS);
    return Promise.resolve();
  }

  note(text: string): Promise<void> {
    this.notes.push(text);
    this.#draw(true);
    return Promise.resolve();
  }

  /** The last state stays on the screen. */
  close(): void {
    if (this.#isStale) this.#draw(true);
  }

  #draw(isDue: boolean): void {
    this.#isStale = !isDue;
    if (!isDue || this.#last === null) return;
    const text = watchPage({ ...this.#last, notes: this.notes }, this.#paint);
    const up = this.#lines > 0 ? `\u001b[${this.#lines}A\r\u001b[0J` : '';
    this.#stream.write(up + text);
    this.#lines = text.split('\n').length - 1;
    this.#drawn = performance.now();
  }
}

/** What the view shows, as text of at most 80 columns; ends with a line break. */
export function watchPage({ folder, records, verdict, forecast, notes }: RunSoFar, paint: Paint) {
  const ordered = records
    .filter(({ time }) => time !== null)
    .sort((a, b) => (a.time ?? 0) - (b.time ?? 0));
  const count = records.length === 1 ? '1 snapshot' : `${records.length} snapshots`;
  const now = ordered.at(-1)?.time;
  const head = `${shorten(printable(folder), 50)}  ${count}${now === null || now === undefined ? '' : `, time ${short(now, 6)}`}`;
  const good = verdict?.verdict === 'settled' || verdict?.verdict === 'relaxing';
  const state = verdict === null ? 'waiting for snapshots' : verdict.verdict;
  const why = verdict?.evidence.at(-1)?.text;
  const lines = [
    `${paint.strong(head)}`,
    `${paint[good ? 'good' : 'warn'](state)}${(verdict?.settledAt ?? null) === null ? '' : ` since time ${short(verdict?.settledAt ?? 0, 4)} ± ${short(verdict?.settledAtError ?? 0)}`}`,
    ...(why === undefined ? [] : [wrap(asSentence(why), '  ')]),
    ...(forecast === null ? [] : [wrap(asSentence(forecastWords(forecast)), '  ')]),
    ...(ordered.length < 2 ? [] : plots(ordered, verdict)),
    ...notes.slice(-NOTES).map((note) => wrap(asSentence(printable(note)), '  ', paint.warn('! '))),
  ];
  return `${lines.join('\n')}\n`;
}

function plots(records: readonly MeasureRecord[], verdict: RunSoFar['verdict']): string[] {
  const set = verdict?.ratio.set ?? 'whole';
  const kind = verdict?.ratio.kind ?? kindOf(records[records.length - 1]);
  const times = records.map(({ time }) => time ?? 0);
  const noise = verdict?.ratio.noise ?? null;
  const size = { width: PAGE_WIDTH, label: (value: number) => short(value, 3) };
  const radii = FRACTIONS.map((fraction) => ({
    x: times,
    y: records.map((record) => {
      const { fractions, radii: all } =
        set === 'bound' ? record.boundLagrangian : record.lagrangian;
      const radius = all[fractions.indexOf(fraction)] ?? 0;
      return radius > 0 ? Math.log10(radius) : NaN;
    }),
  }));
  const name = kind === 'virialRatio' ? '2T/|U|' : '2T/|W|';
  return [
    `${name}${noise === null ? '' : ', and the band of its noise'}`,
    ...terminalPlot(
      [{ x: times, y: records.map((record) => (record[set] ?? record.whole)[kind] ?? NaN) }],
      {
        ...size,
        height: RATIO_ROWS,
        band: noise === null ? null : [1 - noise, 1 + noise],
      },
    ),
    `radii of ${FRACTIONS.map((fraction) => `${100 * fraction}`).join(', ')} % of the mass, logarithmic`,
    ...terminalPlot(radii, {
      ...size,
      height: RADII_ROWS,
      label: (value) => short(10 ** value, 3),
    }),
    `from time ${short(times[0], 4)} to ${short(times[times.length - 1], 4)}`,
  ];
}
