/**
 * Do numbers look as if their bytes had been read in the wrong order or width?
 *
 * Measured, not published: coordinates and speeds of a system spread over one or two decades
 * (5 to 95 % of the magnitudes), over some eight in extreme cusps. Doubles read in the wrong order
 * spread over hundreds, because digits of the mantissa become the exponent; two float32 read as one
 * float64 spread eight times as far as they should, because the exponent gets three bits more.
 */
import type { FloatColumn } from './particles.ts';

/** What misreading explains the numbers, in words that end "it looks as if ...". */
export type Misreading = string;

const TOO_LARGE = 1e150;
const TOO_SMALL = 1e-150;
/** Share of the non-zero magnitudes beyond the bounds above that no simulation has. */
const ABSURD_SHARE = 0.05;
const ABSURD_DECADES = { double: 100, single: 40 };
/** All coordinates and speeds at once over more than this many decades: no orbit does that. */
const WIDE_DECADES = 8;
const SAMPLE = 512;
const LEAST_TO_JUDGE = 16;

interface Spread {
  /** Decades between the 5th and the 95th percentile of the non-zero magnitudes. */
  readonly decades: number;
  /** Share of these outside 1e±150. */
  readonly absurd: number;
  /** Finite values other than 0. */
  readonly nonZero: number;
}

/**
 * Looks at a sample of each column (every k-th value).
 * @param coordinates - x y z vx vy vz
 * @param suspicious - something else is wrong already: then the spread alone is evidence enough
 */
export function findMisreading(
  coordinates: readonly FloatColumn[],
  suspicious: boolean,
): Misreading | null {
  const samples = coordinates.map(sampleOf);
  if (!suspicious && samples.every(isNarrow)) return null;
  const spreads = samples.map(spreadOf);
  const judged = spreads.filter((spread) => spread.nonZero >= LEAST_TO_JUDGE);
  if (judged.length === 0) return null;
  const absurd = spreads.some(
    (spread, index) =>
      spread.nonZero >= LEAST_TO_JUDGE &&
      (spread.absurd > ABSURD_SHARE ||
        spread.decades >
          (coordinates[index] instanceof Float32Array
            ? ABSURD_DECADES.single
            : ABSURD_DECADES.double)),
  );
  const wide = judged.filter((spread) => spread.decades > WIDE_DECADES).length;
  const allWide = judged.length >= 4 && wide === judged.length;
  if (!absurd && !allWide && !(suspicious && 2 * wide > judged.length)) return null;
  return causeOf(samples);
}

/** Whether all magnitudes lie so close together that no percentile need be found: sorting takes longer. */
function isNarrow(sample: FloatColumn): boolean {
  let smallest = Infinity;
  let largest = 0;
  for (let i = 0; i < sample.length; i++) {
    const magnitude = Math.abs(sample[i]);
    if (magnitude === 0) continue;
    if (magnitude < smallest) smallest = magnitude;
    if (magnitude > largest) largest = magnitude;
  }
  const isOrdinary = smallest >= TOO_SMALL && largest <= TOO_LARGE;
  return isOrdinary && largest <= 10 ** (WIDE_DECADES - 1) * smallest;
}

/** Most columns, not all: a plane system has nothing but rounding errors in one of them. */
function areOrdinary(samples: readonly FloatColumn[]): boolean {
  const ordinary = samples.map(spreadOf).filter((spread) => {
    return spread.absurd === 0 && spread.decades <= WIDE_DECADES;
  });
  return 3 * ordinary.length >= 2 * samples.length;
}

/** Puts each likely mistake right on the sample and looks whether the numbers become ordinary. */
function causeOf(samples: readonly FloatColumn[]): Misreading {
  if (areOrdinary(samples.map(swapped))) {
    return 'the byte order is the other one';
  }
  if (samples.every((sample) => sample instanceof Float64Array)) {
    if (areOrdinary(samples.map(asSingles))) {
      return 'they are float32 and were read as float64';
    }
    if (areOrdinary(samples.map((sample) => asSingles(swapped(sample))))) {
      return 'they are float32 in the other byte order and were read as float64';
    }
  } else if (samples.every((sample) => sample instanceof Float32Array)) {
    return 'they are float64 and were read as float32, or the layout is shifted by some bytes';
  }
  return 'byte order, number type or offset in the layout is wrong';
}

function sampleOf(column: FloatColumn): FloatColumn {
  const step = Math.max(1, Math.floor(column.length / SAMPLE));
  const sample =
    column instanceof Float32Array
      ? new Float32Array(Math.floor((column.length - 1) / step) + 1)
      : new Float64Array(Math.floor((column.length - 1) / step) + 1);
  for (let i = 0; i < sample.length; i++) sample[i] = column[i * step];
  return sample;
}

function swapped(sample: FloatColumn): FloatColumn {
  const copy = sample.slice();
  const bytes = Buffer.from(copy.buffer);
  if (copy instanceof Float64Array) bytes.swap64();
  else bytes.swap32();
  return copy;
}

function asSingles(sample: FloatColumn): Float32Array {
  return new Float32Array(sample.slice().buffer);
}

function spreadOf(sample: FloatColumn): Spread {
  const logs = new Float64Array(sample.length);
  let nonZero = 0;
  let absurd = 0;
  for (let i = 0; i < sample.length; i++) {
    const magnitude = Math.abs(sample[i]);
    if (magnitude === 0 || !Number.isFinite(magnitude)) continue;
    if (magnitude > TOO_LARGE || magnitude < TOO_SMALL) absurd++;
    logs[nonZero++] = Math.log10(magnitude);
  }
  if (nonZero === 0) return { decades: 0, absurd: 0, nonZero };
  const sorted = logs.subarray(0, nonZero).sort();
  const at = (share: number): number => sorted[Math.floor(share * (nonZero - 1))];
  return { decades: at(0.95) - at(0.05), absurd: absurd / nonZero, nonZero };
}
