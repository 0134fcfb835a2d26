/** Which snapshots of a folder are whole and new. */
import { appendFileSync, mkdtempSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterEach, beforeEach, describe, expect, it } from 'vitest';
import { makeModel } from '../../src/index.ts';
import { writeSnapshot } from '../../src/index.ts';
import { follow, type Sighting } from '../../src/survey/follow.ts';

let folder: string;
let bytes: Buffer;
let stop: AbortController;

beforeEach(async () => {
  folder = mkdtempSync(join(tmpdir(), 'settlemark-follow-'));
  stop = new AbortController();
  const particles = await makeModel({ model: 'plummer', count: 100, seed: 1, masses: 'equal' });
  const path = join(folder, 'x.bin');
  await writeSnapshot(path, particles, 'raw');
  bytes = readFileSync(path);
  rmSync(path);
});
afterEach(() => {
  stop.abort();
  rmSync(folder, { recursive: true });
});

const start = (patienceSeconds = 60) =>
  follow(
    folder,
    {},
    { pollSeconds: 0.05, stillSeconds: 0.1, patienceSeconds, signal: stop.signal },
  );

/** The next sighting of a kind. */
async function next(sightings: AsyncGenerator<Sighting>, kind: Sighting['kind']) {
  for (;;) {
    const step = await sightings.next();
    if (step.done === true) throw new Error('it ended');
    if (step.value.kind === kind) return step.value;
  }
}
const filesOf = (sighting: Sighting) =>
  sighting.kind === 'ready' ? sighting.snapshots.map(({ file }) => file) : [];

describe('a file', () => {
  it('is given once, when it has all its bytes', async () => {
    const path = join(folder, 'a.bin');
    const sightings = start();
    await next(sightings, 'idle');
    writeFileSync(path, bytes.subarray(0, 1000));
    const ready = next(sightings, 'ready');
    await new Promise((resolve) => setTimeout(resolve, 400));
    appendFileSync(path, bytes.subarray(1000));
    expect(filesOf(await ready)).toEqual([path]);
    expect(readFileSync(path)).toEqual(bytes);
    const idle = await next(sightings, 'idle');
    expect(idle).toEqual({ kind: 'idle' });
  });

  it('is given again when it was written anew', async () => {
    const path = join(folder, 'a.bin');
    writeFileSync(path, bytes);
    const sightings = start();
    expect(filesOf(await next(sightings, 'ready'))).toEqual([path]);
    writeFileSync(path, Buffer.concat([bytes, bytes]));
    expect(filesOf(await next(sightings, 'ready'))).toEqual([path]);
  });

  it('that never becomes whole is told of once, with what is wrong', async () => {
    writeFileSync(join(folder, 'a.bin'), bytes.subarray(0, 1000));
    const sightings = start(0.2);
    const told = await next(sightings, 'incomplete');
    expect(told).toMatchObject({ file: join(folder, 'a.bin') });
    expect(told.kind === 'incomplete' && told.error.code).toMatch(/^input\./);
    writeFileSync(join(folder, 'b.bin'), bytes);
    expect(filesOf(await next(sightings, 'ready'))).toEqual([join(folder, 'b.bin')]);
    writeFileSync(join(folder, 'a.bin'), bytes);
    expect(filesOf(await next(sightings, 'ready'))).toEqual([join(folder, 'a.bin')]);
  });
});

it('several at once come in the natural order of their names', async () => {
  for (const name of ['s10.bin', 's9.bin', 'notes.txt', '.hidden.bin', 's11.bin'])
    writeFileSync(join(folder, name), bytes);
  const files = filesOf(await next(start(), 'ready'));
  expect(files).toEqual(['s9.bin', 's10.bin', 's11.bin'].map((name) => join(folder, name)));
});

it('ends with the signal, at once', async () => {
  const sightings = follow(
    folder,
    {},
    { pollSeconds: 3600, stillSeconds: 1, patienceSeconds: 60, signal: stop.signal },
  );
  await next(sightings, 'idle');
  const last = sightings.next();
  stop.abort();
  expect(await last).toMatchObject({ done: true });
});
