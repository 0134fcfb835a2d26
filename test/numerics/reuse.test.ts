/** Shared memory used again: never by two at once, and only inside a scope. */
import { expect, it } from 'vitest';
import { reusingMemory, takeBuffer, takeDoubles } from '../../src/numerics/reuse.ts';

const BYTES = 1 << 20;

it('gives a buffer back to the next scope, not to the same one', async () => {
  const first = await reusingMemory(() => {
    const a = takeBuffer(BYTES);
    expect(takeBuffer(BYTES)).not.toBe(a);
    return Promise.resolve(a);
  });
  await reusingMemory(() => {
    const again = [takeBuffer(BYTES), takeBuffer(BYTES), takeBuffer(BYTES)];
    expect(again).toContain(first);
    expect(new Set(again).size).toBe(3);
    return Promise.resolve();
  });
});

it('keeps scopes that run side by side apart', async () => {
  const seen: SharedArrayBuffer[] = [];
  let release = (): void => undefined;
  const allTaken = new Promise<void>((resolve) => (release = resolve));
  const work = () =>
    reusingMemory(async () => {
      for (let k = 0; k < 5; k++) {
        seen.push(takeBuffer(BYTES));
        await new Promise((resolve) => setImmediate(resolve));
      }
      if (seen.length === 10) release();
      await allTaken;
    });
  await Promise.all([work(), work()]);
  expect(new Set(seen).size).toBe(10);
});

it('allocates as usual outside a scope, and hands out the length asked for', async () => {
  expect(takeBuffer(BYTES)).not.toBe(takeBuffer(BYTES));
  await reusingMemory(() => Promise.resolve(takeDoubles(100_000)));
  await reusingMemory(() => {
    // The kept buffer is larger than this; the view is not.
    expect(takeDoubles(90_000).length).toBe(90_000);
    return Promise.resolve();
  });
});

it('gives back what a scope took that failed', async () => {
  let lost: SharedArrayBuffer | null = null;
  const failing = reusingMemory(() => {
    lost = takeBuffer(BYTES);
    return Promise.reject(new Error('no'));
  });
  await expect(failing).rejects.toThrow('no');
  const next = await reusingMemory(() => Promise.resolve(takeBuffer(BYTES)));
  expect(next).toBe(lost);
});
