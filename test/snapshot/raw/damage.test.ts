import fc from 'fast-check';
import { beforeAll, expect, it } from 'vitest';
import { InputError } from '../../../src/errors.ts';
import { describeRaw } from '../../../src/snapshot/raw/describe.ts';
import type { LayoutInput } from '../../../src/snapshot/raw/layout.ts';
import { readRaw } from '../../../src/snapshot/raw/read.ts';
import { bodies, f64, i32, newFolder, put, putLayout, record, VECTORS } from './samples.ts';

let folder: string;
beforeAll(async () => {
  folder = await newFolder();
});

const HEADER = Buffer.concat([f64('little', 1), i32('little', 5, 0)]);
const ITEMS = {
  headerBytes: 16,
  header: [
    { name: 'time', type: 'float64' as const, offset: 0 },
    { name: 'count', type: 'int32' as const, offset: 8 },
  ],
  fields: VECTORS,
};
const whole: [string, Buffer, Omit<LayoutInput, 'settlemark'>][] = [
  ['plain', Buffer.concat([HEADER, bodies('little', 5)]), ITEMS],
  [
    'one record',
    Buffer.concat([record('little', HEADER), record('little', bodies('little', 5))]),
    { ...ITEMS, markers: 'fortran4' },
  ],
];

// No source: damage must end in an answer or in an InputError, never in a bug or a wait for ever.
it.each(whole)('survives damage to a file (%s)', async (name, bytes, layoutInput) => {
  const layout = await putLayout(folder, layoutInput, `${name}.layout.json`);
  const change = fc.tuple(fc.nat(bytes.length - 1), fc.nat(255));
  await fc.assert(
    fc.asyncProperty(
      fc.array(change, { minLength: 1, maxLength: 4 }),
      fc.option(fc.nat(bytes.length)),
      fc.uint8Array({ maxLength: 9 }),
      async (changes, cut, tail) => {
        const damaged = Buffer.from(bytes);
        for (const [at, value] of changes) damaged[at] = value;
        const file = Buffer.concat([damaged.subarray(0, cut ?? bytes.length), tail]);
        const path = await put(folder, 'damaged.bin', file);
        for (const read of [readRaw, describeRaw]) {
          try {
            const { count } = await read(path, { layout });
            // What was read can only be what the file has room for.
            expect(count * 56).toBeLessThanOrEqual(file.length);
          } catch (error) {
            if (!(error instanceof InputError)) throw error;
            expect(error.message).toContain(path);
            expect(error.remedy).not.toBe('');
          }
        }
      },
    ),
    { numRuns: 300 },
  );
});
