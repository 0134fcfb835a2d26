/** Colours, only where a person looks at a terminal that wants them. */
import * as util from 'node:util';
import type { OutStream, Streams } from './streams.ts';

export interface Paint {
  readonly strong: (text: string) => string;
  readonly faint: (text: string) => string;
  readonly good: (text: string) => string;
  readonly warn: (text: string) => string;
  readonly bad: (text: string) => string;
}

const plain = (text: string): string => text;
export const NO_PAINT: Paint = {
  strong: plain,
  faint: plain,
  good: plain,
  warn: plain,
  bad: plain,
};

const COLOURS: Paint = {
  strong: (text) => util.styleText('bold', text),
  faint: (text) => util.styleText('dim', text),
  good: (text) => util.styleText('green', text),
  warn: (text) => util.styleText('yellow', text),
  bad: (text) => util.styleText('red', text),
};

/** Colours for a stream; none unless it is a terminal, under NO_COLOR (no-color.org), or on a dumb one. */
export function paintFor(stream: OutStream, env: Streams['env']): Paint {
  const wanted = stream.isTTY === true && !env['NO_COLOR'] && env['TERM'] !== 'dumb';
  // The first releases of Node 20 have no styleText.
  return wanted && 'styleText' in util ? COLOURS : NO_PAINT;
}
