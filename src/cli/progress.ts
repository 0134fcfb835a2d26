/** One line on a terminal that says what is going on, once the work has taken a second. */
import type { Crew, Stage } from '../index.ts';
import { shorten } from './layout.ts';
import type { OutStream } from './streams.ts';

const SHOW_AFTER_MS = 1000;
const EVERY_MS = 150;
const ERASE = '\r\u001b[2K';
const NAME_WIDTH = 40;

const DOING: Record<Stage, string> = {
  together: 'and those after it',
  reading: 'reading',
  tree: 'building the tree',
  forces: 'summing forces',
  error: 'measuring the error',
  dynamics: 'centre, radii and bound set',
};

export interface Progress {
  /** What is being done, and which share of it is done; null if the crew's counter tells. */
  say(text: string, share: number | null): void;
  /** A stage of one snapshot has begun or got further; may be called as often as one likes. */
  stage(name: string, stage: Stage, fraction: number | null): void;
  /** Takes the line away, so that other text can be printed. */
  clear(): void;
  close(): void;
}

/** Progress on `stream` if it is a terminal and `quiet` is not wanted; else one that says nothing. */
export function startProgress(stream: OutStream, quiet: boolean, crew: Crew): Progress {
  if (quiet || stream.isTTY !== true) {
    const nothing = (): void => undefined;
    return { say: nothing, stage: nothing, clear: nothing, close: nothing };
  }
  const start = performance.now();
  let label = '';
  let share: number | null = null;
  let last = 0;
  let shown = false;
  const draw = (now: number): void => {
    if (label === '' || now - start < SHOW_AFTER_MS || now - last < EVERY_MS) return;
    const { done, jobs } = crew.progress();
    const part = share ?? (jobs > 0 ? done / jobs : null);
    const percent = part === null ? '' : ` ${Math.floor(100 * Math.min(1, part))} %`;
    stream.write(`${ERASE}${label}${percent}`);
    last = now;
    shown = true;
  };
  // The crew's counter moves without telling; a timer that keeps no process alive looks at it.
  const timer = setInterval(() => draw(performance.now()), EVERY_MS).unref();
  const clear = (): void => {
    if (shown) stream.write(ERASE);
    shown = false;
  };
  const say = (text: string, fraction: number | null): void => {
    label = text;
    share = fraction;
    draw(performance.now());
  };
  return {
    say,
    stage: (name, stage, fraction) => {
      say(`${shorten(name, NAME_WIDTH)}: ${DOING[stage]}`, fraction);
    },
    clear,
    close() {
      clearInterval(timer);
      clear();
      label = '';
    },
  };
}
