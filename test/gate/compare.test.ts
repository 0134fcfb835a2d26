import { describe, expect, it } from 'vitest';
import { compareRuns } from '../../src/gate/compare.ts';
import { holm } from '../../src/gate/compareHolm.ts';
import { distinctLabellings } from '../../src/gate/comparePermutation.ts';
import { parseReference, referenceText } from '../../src/gate/compareReference.ts';
import type { ComparedRun } from '../../src/gate/compareRun.ts';
import { normalPoint, normalTail } from '../../src/numerics/normal.ts';
import { Random } from '../../src/numerics/random.ts';
import { smallRun } from './compareBank.ts';

const bank = Array.from({ length: 48 }, (_, k) => smallRun(k + 1));

function drawn(random: Random, count: number): ComparedRun[] {
  const order = [...bank];
  for (let k = order.length - 1; k > 0; k--) {
    const other = Math.floor(random.uniform() * (k + 1));
    [order[k], order[other]] = [order[other], order[k]];
  }
  return order.slice(0, count);
}

const moved = (run: ComparedRun, quantity: string, by: number): ComparedRun => ({
  ...run,
  values: { ...run.values, [quantity]: run.values[quantity].map((value) => value + by) },
});

// Of n draws at rate p, fewer than p n + 4 √(p (1 − p) n) but once in 30,000 (normal limit of the binomial).
const most = (n: number, p: number) => p * n + 4 * Math.sqrt(p * (1 - p) * n);

describe('correct runs', () => {
  it.each([
    ['6 against 6', 6, 6],
    ['1 against 19', 1, 19],
    ['1 against 1', 1, 1],
  ])('%s are called different at the rate asked for, at most', (_name, a, b) => {
    const random = new Random(a * 100 + b);
    const draws = a === 6 ? 100 : 150;
    for (const falseAlarm of [0.05, 0.2]) {
      let different = 0;
      for (let k = 0; k < draws; k++) {
        const runs = drawn(random, a + b);
        const found = compareRuns(runs.slice(0, a), runs.slice(a), { falseAlarm });
        if (found.verdict === 'different') different++;
      }
      expect(different).toBeLessThanOrEqual(most(draws, falseAlarm));
      // A test that never speaks keeps its rate too: exchanged labels must reach it.
      if (a > 1)
        expect(different).toBeGreaterThan(2 * falseAlarm * draws - most(draws, falseAlarm));
    }
  });
});

describe('runs that are off', () => {
  it('by what the comparison says it would see are seen, most of the time, and named', () => {
    const random = new Random(9);
    let seen = 0;
    let named = 0;
    for (let k = 0; k < 40; k++) {
      const runs = drawn(random, 20);
      const [candidates, references] = [runs.slice(0, 10), runs.slice(10)];
      const size = compareRuns(candidates, references).quantities.find(
        ({ quantity }) => quantity === 'lagrangian[0.5]',
      )?.detectable as number;
      const off = candidates.map((run) => moved(run, 'lagrangian[0.5]', size));
      const found = compareRuns(off, references);
      if (found.verdict === 'different') seen++;
      if (found.quantities.find(({ quantity }) => quantity === 'lagrangian[0.5]')?.different)
        named++;
    }
    // 80 % asked; 60 % of 40 is three standard deviations less.
    expect(seen).toBeGreaterThan(24);
    expect(named).toBeGreaterThan(20);
  });

  it('by a G a third too large are seen, the ratio among what differs', () => {
    const wrong = Array.from({ length: 8 }, (_, k) => smallRun(k + 200, 32, 4 / 3));
    const found = compareRuns(wrong, bank.slice(0, 16));
    expect(found.method).toBe('permutation');
    expect(found.verdict).toBe('different');
    expect(found.p).toBeLessThan(0.01);
    expect(found.quantities.filter((one) => one.different).map((one) => one.quantity)).toContain(
      'ratio',
    );
  });

  it('from the same bodies are compared in pairs: a change far below the scatter of seeds is seen', () => {
    const references = bank.slice(0, 8);
    const random = new Random(4);
    const jittered = references.map((run) => ({
      ...run,
      values: {
        ...run.values,
        ratio: run.values['ratio'].map((value, k) =>
          k === 0 ? value : value + 1e-3 * random.normal(),
        ),
      },
    }));
    expect(compareRuns(jittered, references)).toMatchObject({ start: 'paired', verdict: 'same' });
    const off = jittered.map((run) => ({
      ...run,
      values: {
        ...run.values,
        ratio: run.values['ratio'].map((value, k) => (k === 0 ? value : value + 0.01)),
      },
    }));
    expect(compareRuns(off, references)).toMatchObject({ start: 'paired', verdict: 'different' });
  });

  it('one against one: a radius half as large again is seen at N = 3200, not at N = 32', () => {
    const large = bank
      .slice(0, 2)
      .map((run) => ({ ...run, setup: { ...run.setup, effectiveNumber: 3200 } }));
    // The runs are made alike, so that only the change is judged.
    const twin = { ...moved(large[0], 'lagrangian[0.5]', 0.4), name: 'twin' };
    expect(compareRuns([twin], [large[0]])).toMatchObject({
      method: 'bands',
      verdict: 'different',
    });
    expect(compareRuns([moved(bank[0], 'lagrangian[0.5]', 0.4)], [bank[0]]).verdict).toBe('same');
  });
});

describe('what cannot be compared', () => {
  const [a, b] = bank;
  it.each([
    ['other N', { particles: 33 }, /33 bodies at its start, the reference 32/],
    ['other G', { gravity: 2 }, /G = 2/],
    ['other units', { units: 'si' }, /units/],
    ['other softening', { softening: { length: 0.2, kernel: 'plummer' } }, /plummer 0.2/],
  ])('%s is refused by name', (_name, change, text) => {
    const other = { ...a, setup: { ...a.setup, ...change } };
    expect(() => compareRuns([other], [b])).toThrow(
      expect.objectContaining({
        code: 'input.otherSetup',
        message: expect.stringMatching(text) as string,
      }),
    );
  });

  it('no time in common, no runs, and a rate that is none', () => {
    const later = { ...a, times: a.times.map((t) => t + 100) };
    const code = (text: string) => expect.objectContaining({ code: text }) as Error;
    expect(() => compareRuns([later], [b])).toThrow(code('unanswerable.noOverlap'));
    expect(() => compareRuns([], [b])).toThrow(code('unanswerable.noRuns'));
    expect(() => compareRuns([a], [b], { falseAlarm: 1 })).toThrow(code('usage.range'));
  });

  it('lost bodies are a difference, however few the runs', () => {
    const values = (last: number) => ({
      ...a.values,
      particles: a.times.map((_, k) => Math.log(k < 5 ? 32 : last)),
    });
    const found = compareRuns([{ ...a, values: values(31) }], [{ ...b, values: values(32) }]);
    expect(found.quantities.filter((one) => one.different).map((one) => one.quantity)).toEqual([
      'particles',
    ]);
  });
});

describe('a stored reference', () => {
  it('gives the same comparison, to the digits it keeps', () => {
    const stored = parseReference(referenceText(bank.slice(10)), 'reference.json');
    const direct = compareRuns(bank.slice(0, 10), bank.slice(10));
    expect(compareRuns(bank.slice(0, 10), stored).p).toBe(direct.p);
  });

  it.each([
    ['{', 'input.notAReference', /not JSON/],
    ['{"settlemark":"comparison/7","runs":[]}', 'input.referenceVersion', /comparison\/7/],
    ['{"settlemark":"comparison/1","runs":[]}', 'input.notAReference', /no "runs"/],
    [
      referenceText([bank[0]]).replace('"mass":1,', ''),
      'input.notAReference',
      /runs\[0\].*setup\.mass/,
    ],
    [referenceText([{ ...bank[0], times: [0] }]), 'input.notAReference', /list of 1 numbers/],
  ])('that is damaged is refused with the place: %.40s', (text, code, message) => {
    expect(() => parseReference(text, 'ref.json')).toThrow(
      expect.objectContaining({ code, message: expect.stringMatching(message) as string }),
    );
  });
});

describe('statistics', () => {
  it('normal tail and its inverse', () => {
    // Source: Abramowitz & Stegun 1964, table 26.1 (P(1.96) = 0.9750021049), and tables of erfc.
    expect(normalTail(1.96)).toBeCloseTo(2 * (1 - 0.9750021049), 9);
    expect(normalTail(0)).toBe(1);
    expect(Math.abs(normalTail(5) / 5.733031437583892e-7 - 1)).toBeLessThan(1e-9);
    expect(normalPoint(0.05)).toBeCloseTo(1.959963985, 8);
  });

  it('Holm’s correction', () => {
    // By hand after Holm 1979: 4 × 0.01, 3 × 0.02, 2 × 0.03, never less than the one before.
    const adjusted = holm([0.03, 0.01, 0.02, 0.9]);
    [0.06, 0.04, 0.06, 0.9].forEach((value, k) => expect(adjusted[k]).toBeCloseTo(value, 12));
  });

  it('labellings that can be told apart', () => {
    expect(distinctLabellings(1, 19, false)).toBe(20);
    expect(distinctLabellings(3, 3, false)).toBe(10); // 6!/(3! 3!) halved: two-sided
    expect(distinctLabellings(6, 6, true)).toBe(32);
  });
});
