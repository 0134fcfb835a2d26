/** What may not change a record, and what must change it by known powers. */
import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import type { MeasureRecord } from '../../src/dynamics/record.ts';
import { QUANTITIES } from '../../src/dynamics/registry.ts';
import type { MeasureOptions } from '../../src/dynamics/settings.ts';
import type { SofteningKernel } from '../../src/octree/softening.ts';
import { cloud, measure, particlesOf, type Body } from './samples.ts';

const scene = fc.record({
  count: fc.integer({ min: 2, max: 60 }),
  seed: fc.nat(1e6),
  kernel: fc.constantFrom<SofteningKernel>('none', 'plummer', 'spline'),
  speed: fc.constantFrom(0.1, 0.5, 1.5),
});
type Scene = typeof scene extends fc.Arbitrary<infer S> ? S : never;

const LENGTH = 0.2;
const optionsOf = ({ kernel }: Scene, scale = 1): MeasureOptions => ({
  with: ['all'],
  ...(kernel !== 'none' && { softening: LENGTH * scale, softeningKernel: kernel }),
});
const bodiesOf = ({ count, seed, speed }: Scene): Body[] => cloud(count, seed, speed);

/** The value at a path of the record. */
function at(record: MeasureRecord, key: string): unknown {
  return key.split('.').reduce<unknown>((o, k) => (o as Record<string, unknown>)[k], record);
}

/** Extras are there only if they were asked for. */
const hasKey = (record: MeasureRecord, key: string): boolean => key.split('.')[0] in record;

/** Numbers that may be compared between records: scalars and lists, by key. */
function numbers(record: MeasureRecord, skip: RegExp): [string, number | null][] {
  return QUANTITIES.filter(({ key }) => !skip.test(key) && hasKey(record, key)).flatMap(
    ({ key }) => {
      const value = at(record, key) as number | null | readonly (number | null)[];
      return Array.isArray(value)
        ? value.map((v: number | null, k): [string, number | null] => [`${key}[${k}]`, v])
        : [[key, value as number | null]];
    },
  );
}

/** Errors are of rounding size in direct sums, and themselves no more than that. */
const ROUNDING = /Error$/;
/** What has a place or a direction. */
const FRAME = /^frame\.|axis$/;

function expectSame(
  a: MeasureRecord,
  b: MeasureRecord,
  skip: RegExp,
  relative: number,
  factor: (key: string) => number = () => 1,
): void {
  const others = new Map(numbers(b, skip));
  for (const [key, value] of numbers(a, skip)) {
    const other = others.get(key);
    if (value === null || other === null || other === undefined) {
      expect(other, key).toBe(value);
      continue;
    }
    const expected = value * factor(key);
    const scale = scaleOf(a, key) * factor(key);
    expect(Math.abs(other - expected), `${key}: ${other}, expected ${expected}`).toBeLessThan(
      relative * Math.max(scale, Math.abs(expected)) + 1e-300,
    );
  }
}

/** What a difference that may cancel has to be compared with. */
function scaleOf(record: MeasureRecord, key: string): number {
  const { whole, momentOfInertia, velocityDispersion: v } = record;
  if (key.startsWith('momentOfInertiaRate')) return Math.sqrt(momentOfInertia * whole.mass) * v;
  if (key.startsWith('frame.angularMomentum')) return Math.sqrt(momentOfInertia * whole.mass) * v;
  if (key.startsWith('momentOfInertiaAcceleration')) return 4 * whole.kinetic;
  if (/^shells\.(radialV|rot|.*Dispersion)/.test(key)) return v;
  if (/^shells\.(ani|axis)/.test(key)) return 1;
  if (key.endsWith('.energy')) return whole.kinetic - whole.potential;
  if (key.startsWith('frame.meanVelocity')) return v;
  if (key.startsWith('frame.') || key.includes('agrangian') || key === 'coreRadius') {
    return record.halfMassRadius;
  }
  return 0;
}

const runs = { numRuns: 60, seed: 42 };

describe('a record does not depend on', () => {
  it('where the system is (fast-check)', async () => {
    const shift = fc.tuple(...[0, 1, 2].map(() => fc.double({ min: -1e3, max: 1e3, noNaN: true })));
    await fc.assert(
      fc.asyncProperty(scene, shift, async (s, [x, y, z]) => {
        const bodies = bodiesOf(s);
        const moved = bodies.map(([m, a, b, c, ...v]): Body => [m, a + x, b + y, c + z, ...v]);
        const [one, two] = [
          await measure(particlesOf(bodies), optionsOf(s)),
          await measure(particlesOf(moved), optionsOf(s)),
        ];
        // Positions near 1e3 are rounded to 1e-13, and pairs closer than 1 lose by it.
        expectSame(one, two, new RegExp(`${ROUNDING.source}|${FRAME.source}`), 1e-9);
        [x, y, z].forEach((d, k) =>
          expect(two.frame.centre[k] - d).toBeCloseTo(one.frame.centre[k], 8),
        );
      }),
      runs,
    );
  });

  it('how fast it moves as a whole (fast-check)', async () => {
    const boost = fc.tuple(...[0, 1, 2].map(() => fc.double({ min: -1e3, max: 1e3, noNaN: true })));
    await fc.assert(
      fc.asyncProperty(scene, boost, async (s, [x, y, z]) => {
        const bodies = bodiesOf(s);
        const moved = bodies.map(([m, a, b, c, u, v, w]): Body => [
          m,
          a,
          b,
          c,
          u + x,
          v + y,
          w + z,
        ]);
        const one = await measure(particlesOf(bodies), optionsOf(s));
        const two = await measure(particlesOf(moved), optionsOf(s));
        expectSame(one, two, new RegExp(`${ROUNDING.source}|meanVelocity`), 1e-9);
        [x, y, z].forEach((d, k) =>
          expect(two.frame.meanVelocity[k] - d).toBeCloseTo(one.frame.meanVelocity[k], 10),
        );
      }),
      runs,
    );
  });

  it('how it is turned (fast-check)', async () => {
    const angle = fc.double({ min: -3, max: 3, noNaN: true });
    await fc.assert(
      fc.asyncProperty(scene, angle, angle, async (s, alpha, beta) => {
        const [c, d, e, f] = [Math.cos(alpha), Math.sin(alpha), Math.cos(beta), Math.sin(beta)];
        const turn = (x: number, y: number, z: number) => {
          const [u, v] = [c * x - d * y, d * x + c * y];
          return [u, e * v - f * z, f * v + e * z] as const;
        };
        const bodies = bodiesOf(s);
        const turned = bodies.map(([m, x, y, z, u, v, w]): Body => [
          m,
          ...turn(x, y, z),
          ...turn(u, v, w),
        ]);
        const one = await measure(particlesOf(bodies), optionsOf(s));
        const two = await measure(particlesOf(turned), optionsOf(s));
        expectSame(one, two, new RegExp(`${ROUNDING.source}|${FRAME.source}`), 1e-10);
        const [x, y, z] = one.frame.angularMomentum;
        turn(x, y, z).forEach((l, k) => expect(two.frame.angularMomentum[k]).toBeCloseTo(l, 10));
      }),
      runs,
    );
  });

  it('the order of the bodies (fast-check)', async () => {
    await fc.assert(
      fc.asyncProperty(scene, fc.integer({ min: 1, max: 50 }), async (s, by) => {
        const bodies = bodiesOf(s);
        const turned = [
          ...bodies.slice(by % bodies.length),
          ...bodies.slice(0, by % bodies.length),
        ];
        turned.reverse();
        const one = await measure(particlesOf(bodies), optionsOf(s));
        const two = await measure(particlesOf(turned), optionsOf(s));
        // Indices are those of the input.
        expectSame(one, two, /Error$|hardestPairs\.(first|second)$/, 1e-11);
      }),
      runs,
    );
  });

  it('bodies without mass among the others', async () => {
    for (let seed = 1; seed <= 5; seed++) {
      const bodies = cloud(40, seed);
      const tracers = cloud(20, seed + 100).map(([, ...rest]): Body => [0, ...rest]);
      const one = await measure(particlesOf(bodies));
      const two = await measure(
        particlesOf([...bodies.slice(0, 7), ...tracers, ...bodies.slice(7)]),
      );
      // They are counted, and have neighbours, which moves the density centre; nothing else is theirs.
      const skip = /Error$|particles$|^frame\.centre|oreRadius|agrangian|halfMass|relaxation|bound/;
      expectSame(one, two, skip, 1e-12);
      expect(two.remarks.map(({ code }) => code)).toContain('tracers');
    }
  });
});

describe('figures go by their dimensions', () => {
  // All figures of the registry, by the powers of mass, length and time that it states.
  it('with masses, lengths and times in any unit (fast-check)', async () => {
    const unit = fc.constantFrom(1e-12, 1e-3, 0.37, 1, 8, 1e6, 1e15);
    await fc.assert(
      fc.asyncProperty(scene, unit, unit, unit, async (s, mass, length, time) => {
        const bodies = bodiesOf(s);
        const v = length / time;
        const scaled = bodies.map(([m, x, y, z, a, b, c]): Body => {
          return [m * mass, x * length, y * length, z * length, a * v, b * v, c * v];
        });
        const gravity = length ** 3 / (mass * time ** 2);
        const one = await measure(particlesOf(bodies), optionsOf(s));
        const two = await measure(particlesOf(scaled), { ...optionsOf(s, length), gravity });
        const dimensions = new Map(QUANTITIES.map((q) => [q.key, q.dimension]));
        const factor = (key: string): number => {
          const d = dimensions.get(key.replace(/\[\d+\]$/, ''));
          if (!d) throw new Error(key);
          return mass ** d.mass * length ** d.length * time ** d.time;
        };
        expectSame(one, two, ROUNDING, 1e-10, factor);
      }),
      runs,
    );
  });
});
