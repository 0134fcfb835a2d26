import { describe, expect, it } from 'vitest';
import { Random, splitmix64 } from '../../src/numerics/random.ts';
import { UsageError } from '../../src/errors.ts';

describe('reference values', () => {
  it('gives the first outputs of xoshiro128** from the state 1, 2, 3, 4', () => {
    // From memory: the test vector that implementations of the algorithm pass round. By hand: the
    // first is rotl(2 · 5, 7) · 9 = 11520.
    const random = new Random([1, 2, 3, 4]);
    expect(Array.from({ length: 10 }, () => random.uint32())).toEqual([
      11520, 0, 5927040, 70819200, 2031721883, 1637235492, 1287239034, 3734860849, 3729100597,
      4258142804,
    ]);
  });

  it('gives the first outputs of splitmix64 from 1234567 and from 0', () => {
    // From memory: the vector for 1234567 that implementations of the algorithm pass round.
    const next = splitmix64(1234567n);
    expect(Array.from({ length: 5 }, next)).toEqual([
      6457827717110365317n,
      3203168211198807973n,
      9817491932198370423n,
      4593380528125082431n,
      16408922859458223821n,
    ]);
    expect(splitmix64(0n)()).toBe(0xe220a8397b1dcdafn); // from memory
  });

  it('makes the state from the seed by splitmix64, low words first', () => {
    const next = splitmix64(42n);
    const [first, second] = [next(), next()];
    const halves = [first, first >> 32n, second, second >> 32n].map((w) => Number(w & 0xffffffffn));
    const expected = new Random([halves[0], halves[1], halves[2], halves[3]]);
    const random = new Random(42);
    for (let i = 0; i < 8; i++) expect(random.uint32()).toBe(expected.uint32());
  });
});

describe('streams', () => {
  /**
   * One step is linear over GF(2). Its matrix, squared n times, is the step of 2^n: linear algebra
   * that shares nothing with the jump polynomials of the source.
   */
  type Columns = readonly bigint[];
  const apply = (columns: Columns, vector: bigint): bigint => {
    let sum = 0n;
    for (let i = 0; vector >> BigInt(i); i++) if ((vector >> BigInt(i)) & 1n) sum ^= columns[i];
    return sum;
  };
  const pack = (words: readonly number[]) =>
    words.reduce((sum, word, i) => sum | (BigInt(word) << BigInt(32 * i)), 0n);
  const unpack = (vector: bigint): [number, number, number, number] => {
    const word = (i: number) => Number((vector >> BigInt(32 * i)) & 0xffffffffn);
    return [word(0), word(1), word(2), word(3)];
  };
  /** The linear step of xoshiro128, written out from the paper's description. */
  const step = (vector: bigint): bigint => {
    let [a, b, c, d] = unpack(vector);
    const shifted = b << 9;
    c ^= a;
    d ^= b;
    b ^= c;
    a ^= d;
    c ^= shifted;
    d = (d << 11) | (d >>> 21);
    return pack([a >>> 0, b >>> 0, c >>> 0, d >>> 0]);
  };
  const powerOfTwoSteps = (n: number): Columns => {
    let columns: Columns = Array.from({ length: 128 }, (_, i) => step(1n << BigInt(i)));
    for (let i = 0; i < n; i++) {
      const previous = columns;
      columns = previous.map((column) => apply(previous, column));
    }
    return columns;
  };

  it.each([
    ['stream', 64],
    ['family', 96],
  ] as const)('%s begins 2^%i steps further on', (kind, exponent) => {
    const start = [1, 2, 3, 4] as const;
    const leap = powerOfTwoSteps(exponent);
    let vector = pack(start);
    for (let k = 0; k < 3; k++) {
      const expected = new Random(unpack(vector));
      const random = new Random(start)[kind](k);
      for (let i = 0; i < 8; i++) expect(random.uint32()).toBe(expected.uint32());
      vector = apply(leap, vector);
    }
  });

  it('counts streams from where a stream began, not from where it stands', () => {
    const random = new Random(7);
    const before = random.stream(2).uint32();
    random.uniform();
    expect(random.stream(2).uint32()).toBe(before);
    expect(random.stream(1).stream(1).uint32()).toBe(before);
  });

  it('refuses streams and seeds that do not exist', () => {
    for (const wrong of [-1, 0.5, NaN, 2 ** 53]) {
      expect(() => new Random(wrong)).toThrow(
        expect.objectContaining({
          code: 'usage.seed',
          message: `The seed is ${wrong}, but must be a whole number from 0 to 9007199254740991.`,
        }),
      );
      expect(() => new Random(1).stream(wrong)).toThrow(
        expect.objectContaining({ code: 'usage.stream' }),
      );
    }
    expect(() => new Random([0, 0, 0, 0])).toThrow(UsageError);
  });
});

// Seeds are fixed, so these tests always give the same answer; the limits are 4.5 standard errors.
describe('statistics', () => {
  const n = 400_000;

  it('fills the unit interval evenly', () => {
    const random = new Random(1);
    const bins = new Float64Array(256);
    const lowBits = new Float64Array(256);
    for (let i = 0; i < n; i++) {
      const u = random.uniform();
      bins[Math.floor(u * 256)]++;
      lowBits[(u * 2 ** 53) % 256]++;
    }
    // Chi-squared with 255 degrees of freedom: mean 255, standard deviation √510.
    for (const counts of [bins, lowBits]) {
      const chi2 = counts.reduce((sum, c) => sum + (c - n / 256) ** 2 / (n / 256), 0);
      expect(Math.abs(chi2 - 255)).toBeLessThan(4.5 * Math.sqrt(510));
    }
  });

  it('keeps openUniform off both ends', () => {
    const random = new Random(2);
    for (let i = 0; i < 1000; i++) {
      const scaled = random.openUniform() * 2 ** 53;
      expect(scaled % 2).toBe(1); // an odd number is neither 0 nor 2^53
    }
  });

  it('draws normals with the moments 0, 1, 0, 3, one independent of the next', () => {
    const random = new Random(3);
    const sums = [0, 0, 0, 0];
    let product = 0;
    let last = random.normal();
    for (let i = 0; i < n; i++) {
      const g = random.normal();
      for (let k = 0; k < 4; k++) sums[k] += g ** (k + 1);
      product += g * last;
      last = g;
    }
    // Variances of g, g², g³, g⁴ are 1, 2, 15, 96.
    const expected = [0, 1, 0, 3];
    const variance = [1, 2, 15, 96];
    for (let k = 0; k < 4; k++) {
      const limit = 4.5 * Math.sqrt(variance[k] / n);
      expect(Math.abs(sums[k] / n - expected[k])).toBeLessThan(limit);
    }
    expect(Math.abs(product / n)).toBeLessThan(4.5 / Math.sqrt(n));
  });

  it('draws unit vectors of length 1 with ⟨n_i⟩ = 0 and ⟨n_i n_j⟩ = δ_ij/3', () => {
    const random = new Random(4);
    const out = new Float64Array(3);
    const first = new Float64Array(3);
    const second = new Float64Array(9);
    let worst = 0;
    for (let i = 0; i < n; i++) {
      random.unitVector(out);
      worst = Math.max(worst, Math.abs(Math.hypot(out[0], out[1], out[2]) - 1));
      for (let a = 0; a < 3; a++) {
        first[a] += out[a] / n;
        for (let b = 0; b < 3; b++) second[3 * a + b] += (out[a] * out[b]) / n;
      }
    }
    expect(worst).toBeLessThan(4e-15); // rounding of some ten operations
    // Variances: n_i 1/3; n_i² 1/5 − 1/9 = 4/45; n_i n_j 1/15.
    for (let a = 0; a < 3; a++) {
      expect(Math.abs(first[a])).toBeLessThan(4.5 * Math.sqrt(1 / 3 / n));
      for (let b = 0; b < 3; b++) {
        const expected = a === b ? 1 / 3 : 0;
        const limit = 4.5 * Math.sqrt((a === b ? 4 / 45 : 1 / 15) / n);
        expect(Math.abs(second[3 * a + b] - expected)).toBeLessThan(limit);
      }
    }
  });
});
