/** Many small snapshots: made here, measured by a fresh process (many.js). */
import { mkdir, rm } from 'node:fs/promises';
import { join } from 'node:path';
import { makeModel } from '../../dist/models/make.js';
import { writeRaw } from '../../dist/snapshot/raw/write.js';
import { inFreshProcess } from './tools.js';

export async function seriesCosts(folder, files, count, threads) {
  const series = join(folder, `series-${count}`);
  await mkdir(series);
  for (let k = 0; k < files; k++) {
    const particles = makeModel({ model: 'plummer', count, seed: k, masses: 'equal' });
    await writeRaw(join(series, `${String(k).padStart(6, '0')}.bin`), particles);
  }
  const costs = inFreshProcess('many.js', series, threads);
  await rm(series, { recursive: true });
  const perFile = (seconds) => (1000 * seconds) / files;
  // Seconds in records are those of single workers.
  const physics = (costs.totalSeconds - costs.readSeconds) / threads;
  const reading = costs.readSeconds / threads;
  return {
    count,
    files,
    ms: perFile(costs.seconds),
    physicsMs: perFile(physics),
    readingMs: perFile(reading),
    beyondMs: perFile(costs.seconds - physics - reading),
    startMs: 1000 * costs.startSeconds,
    peakBytes: costs.peakBytes,
    growthBytes: costs.peakBytes - costs.peakBytesAtTenth,
  };
}
