import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, expect, it } from 'vitest';
import { measureParticles } from '../../src/dynamics/measure.ts';
import { makeModel } from '../../src/models/make.ts';
import { crewOfOne } from '../../src/parallel/crew.ts';
import { writeRaw } from '../../src/snapshot/raw/write.ts';
import { measureFile, type Stage } from '../../src/survey/measure.ts';

let folder = '';
beforeAll(() => void (folder = mkdtempSync(join(tmpdir(), 'settlemark-survey-'))));
afterAll(() => rmSync(folder, { recursive: true }));

it('a file gives the record of its particles, and tells its stages in order', async () => {
  const particles = makeModel({ model: 'plummer', count: 6000, seed: 3 });
  const path = join(folder, 'sphere.bin');
  await writeRaw(path, particles);
  const stages: Stage[] = [];
  let lastFraction = -1;
  const record = await measureFile(
    path,
    {
      error: 1e-4,
      softening: 0.05,
      onStage: (stage, fraction) => {
        if (stages.at(-1) !== stage) stages.push(stage);
        if (fraction === null) return;
        expect(stage).toBe('reading');
        expect(fraction).toBeGreaterThanOrEqual(Math.max(0, lastFraction));
        expect(fraction).toBeLessThanOrEqual(1);
        lastFraction = fraction;
      },
    },
    crewOfOne(),
  );
  expect(stages[0]).toBe('reading');
  expect(stages.at(-1)).toBe('dynamics');
  expect(stages).toContain('forces');
  // A tree may be walked again if the first level misses the error wanted, but is built once.
  expect(stages.filter((stage) => stage === 'tree').length).toBe(1);
  expect(lastFraction).toBe(1);
  const direct = await measureParticles(particles, { error: 1e-4, softening: 0.05 }, crewOfOne());
  // The file holds doubles: the same bits, but for what the reader adds.
  for (const key of ['whole', 'bound', 'lagrangian', 'coreRadius', 'frame'] as const) {
    expect(record[key]).toEqual(direct[key]);
  }
  expect(record.file).toBe(path);
  expect(record.engine.seconds.read).toBeGreaterThan(0);
  const { read, tree, forces, error, dynamics, total } = record.engine.seconds;
  // The parts are timed one by one inside the whole; a clock of microseconds rounds each.
  expect(read + tree + forces + error + dynamics).toBeLessThan(total + 1e-3);
});

it('hands on the errors of reading', async () => {
  await expect(measureFile(join(folder, 'none.bin'), {}, crewOfOne())).rejects.toMatchObject({
    code: 'input.notFound',
    message: expect.stringContaining('none.bin') as string,
  });
  const cut = join(folder, 'cut.bin');
  writeFileSync(cut, Buffer.alloc(57));
  await expect(measureFile(cut, {}, crewOfOne())).rejects.toMatchObject({
    code: expect.stringMatching(/^input\./) as string,
    message: expect.stringContaining('cut.bin') as string,
    remedy: expect.stringMatching(/./) as string,
  });
});
