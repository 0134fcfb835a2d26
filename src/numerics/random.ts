/**
 * Seeded random numbers that are the same on every machine.
 *
 * Generator: xoshiro128** 1.1 (Blackman & Vigna 2021, "Scrambled linear pseudorandom number
 * generators", ACM Trans. Math. Softw. 47, 36): 128 bits of state, period 2^128 − 1, 32 bits a step
 * and all of them good, so that integer arithmetic of JavaScript is enough. Seeding: splitmix64
 * (Steele, Lea & Flood 2014, "Fast splittable pseudorandom number generators", OOPSLA 2014), which
 * spreads neighbouring seeds over the whole state.
 */
import { UsageError } from '../errors.ts';

/** Polynomials that advance the generator by 2^64 and by 2^96 steps (same paper). */
const JUMP_64 = [0x8764000b, 0xf542d2d3, 0x6fa035c3, 0x77f2db5b] as const;
const JUMP_96 = [0xb523952e, 0x0b6f099f, 0xccf5a0ef, 0x1c580662] as const;

type State = readonly [number, number, number, number];

/** Four 32-bit words of state from splitmix64, low word of each 64-bit output first. */
function stateOfSeed(seed: number): State {
  if (!Number.isSafeInteger(seed) || seed < 0) {
    throw new UsageError(
      'usage.seed',
      `The seed is ${seed}, but must be a whole number from 0 to ${Number.MAX_SAFE_INTEGER}.`,
      'Give a seed such as 1.',
    );
  }
  const mixer = splitmix64(BigInt(seed));
  const first = mixer();
  const second = mixer();
  return [
    Number(first & 0xffffffffn),
    Number(first >> 32n),
    Number(second & 0xffffffffn),
    Number(second >> 32n),
  ];
}

/** The splitmix64 sequence that starts at `seed`; each call gives the next 64-bit word. */
export function splitmix64(seed: bigint): () => bigint {
  let counter = seed;
  return () => {
    counter = BigInt.asUintN(64, counter + 0x9e3779b97f4a7c15n);
    let word = counter;
    word = BigInt.asUintN(64, (word ^ (word >> 30n)) * 0xbf58476d1ce4e5b9n);
    word = BigInt.asUintN(64, (word ^ (word >> 27n)) * 0x94d049bb133111ebn);
    return word ^ (word >> 31n);
  };
}

/**
 * One stream of random numbers.
 *
 * A stream remembers where it began: {@link stream} and {@link family} count from there, however many
 * numbers have been drawn since. Work that is cut by the data (chunk k takes `stream(k)`) therefore
 * gives the same numbers in any order and on any number of threads.
 */
export class Random {
  private readonly origin: State;
  private readonly state: Int32Array;
  private spareNormal = NaN;

  /**
   * @param seed - whole number from 0 to 2^53 − 1, or the four 32-bit words of the state, not all zero
   * @throws UsageError `usage.seed`
   */
  constructor(seed: number | State) {
    this.origin = typeof seed === 'number' ? stateOfSeed(seed) : seed;
    if (!this.origin.some((word) => (word | 0) !== 0)) {
      throw new UsageError(
        'usage.seed',
        'The random state is 0 in all four words, but at least one must differ from 0.',
        'Give a seed instead of a state.',
      );
    }
    this.state = Int32Array.from(this.origin, (word) => word | 0);
  }

  /** Stream k of this family: begins k · 2^64 steps after this one began. Takes time in proportion to k. */
  stream(k: number): Random {
    return new Random(jumped(this.origin, JUMP_64, k));
  }

  /** Family k: begins k · 2^96 steps after this one began, so that its streams meet none of this family. */
  family(k: number): Random {
    return new Random(jumped(this.origin, JUMP_96, k));
  }

  /** Next 32 bits, 0 … 2^32 − 1. */
  uint32(): number {
    const s = this.state;
    const s1 = s[1];
    const times5 = Math.imul(s1, 5);
    const result = Math.imul((times5 << 7) | (times5 >>> 25), 9);
    const s2 = s[2] ^ s[0];
    const s3 = s[3] ^ s1;
    s[1] = s1 ^ s2;
    s[0] ^= s3;
    s[2] = s2 ^ (s1 << 9);
    s[3] = (s3 << 11) | (s3 >>> 21);
    return result >>> 0;
  }

  /** Uniform in [0, 1), a multiple of 2^-53. */
  uniform(): number {
    const high = this.uint32() >>> 5;
    const low = this.uint32() >>> 6;
    return (high * 0x4000000 + low) * 2 ** -53;
  }

  /** Uniform in (0, 1), an odd multiple of 2^-53: for logarithms and for inverse functions that end in infinity. */
  openUniform(): number {
    const high = this.uint32() >>> 6;
    const low = this.uint32() >>> 6;
    return (high * 0x4000000 + low + 0.5) * 2 ** -52;
  }

  /** Standard normal deviate (mean 0, variance 1). Source: polar method, Marsaglia & Bray 1964, SIAM Rev. 6, 260. */
  normal(): number {
    if (!Number.isNaN(this.spareNormal)) {
      const spare = this.spareNormal;
      this.spareNormal = NaN;
      return spare;
    }
    let a: number;
    let b: number;
    let square: number;
    do {
      a = 2 * this.openUniform() - 1;
      b = 2 * this.openUniform() - 1;
      square = a * a + b * b;
    } while (square >= 1 || square === 0);
    const factor = Math.sqrt((-2 * Math.log(square)) / square);
    this.spareNormal = b * factor;
    return a * factor;
  }

  /** Writes a vector of length 1 and random direction to `out[0…2]`. Source: Marsaglia 1972, Ann. Math. Stat. 43, 645. */
  unitVector(out: Float64Array): void {
    let a: number;
    let b: number;
    let square: number;
    do {
      a = 2 * this.uniform() - 1;
      b = 2 * this.uniform() - 1;
      square = a * a + b * b;
    } while (square >= 1);
    const factor = 2 * Math.sqrt(1 - square);
    out[0] = a * factor;
    out[1] = b * factor;
    out[2] = 1 - 2 * square;
  }
}

function jumped(origin: State, polynomial: readonly number[], times: number): State {
  if (!Number.isSafeInteger(times) || times < 0) {
    throw new UsageError(
      'usage.stream',
      `The number of the random stream is ${times}, but must be a whole number from 0.`,
      'Count streams from 0.',
    );
  }
  let state = origin;
  for (let jump = 0; jump < times; jump++) {
    const walker = new Random(state);
    let a = 0;
    let b = 0;
    let c = 0;
    let d = 0;
    for (const word of polynomial) {
      for (let bit = 0; bit < 32; bit++) {
        if ((word >>> bit) & 1) {
          const [s0, s1, s2, s3] = walker['state'];
          a ^= s0;
          b ^= s1;
          c ^= s2;
          d ^= s3;
        }
        walker.uint32();
      }
    }
    state = [a >>> 0, b >>> 0, c >>> 0, d >>> 0];
  }
  return state;
}
