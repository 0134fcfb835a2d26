/** A program of somebody else: makes, writes, reads, measures and averages with the library alone. */
import { mkdtemp, rm } from 'node:fs/promises';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import {
  averageBalance,
  describeSnapshot,
  exitCodeOf,
  findSnapshots,
  InputError,
  leapfrog,
  makeSnapshot,
  measure,
  measureFiles,
  measureSnapshot,
  readSnapshot,
  startCrew,
  sumForces,
  writeSnapshot,
  type Balance,
  type MeasureRecord,
  type Particles,
} from 'settlemark';

const folder = await mkdtemp(join(tmpdir(), 'settlemark-consumer-'));
const crew = startCrew(2);
try {
  const made: Particles = await makeSnapshot({ model: 'plummer', count: 6000, seed: 3 }, crew);
  await writeSnapshot(join(folder, 'a.bin'), made, 'raw');
  await writeSnapshot(join(folder, 'b.arrow'), made, 'arrow');

  const read = await readSnapshot(join(folder, 'b.arrow'));
  const description = await describeSnapshot(join(folder, 'a.bin'));
  const forces = await sumForces(
    read,
    { gravity: 1, softening: { kernel: 'none', length: 0 }, errorWanted: 1e-5 },
    crew,
  );
  const record: MeasureRecord = await measureSnapshot(read, {}, crew);
  const balance: Balance = record.whole;
  const records: MeasureRecord[] = [];
  for await (const { record: one, error } of await measureFiles(
    await findSnapshots([folder]),
    {},
    crew,
  )) {
    if (error !== null) throw error;
    records.push(one);
  }

  const pair = await makeSnapshot({ model: 'plummer', count: 100, seed: 1 }, crew);
  const run: MeasureRecord[] = [];
  const options = {
    gravity: 1,
    softening: { kernel: 'plummer', length: 0.1 },
    timeStep: 0.02,
    every: 0.1,
    snapshots: 3,
  } as const;
  for await (const snapshot of leapfrog(pair, options, crew)) {
    run.push(await measureSnapshot(snapshot, {}, crew));
  }
  const average = await averageBalance(run);

  const missing = await measure(join(folder, 'no.bin')).catch((reason: unknown) => reason);
  const code = missing instanceof InputError ? exitCodeOf(missing) : null;
  console.log(
    JSON.stringify({
      count: description.count,
      same: records.map(({ whole }) => whole.potential === balance.potential),
      pairSum: forces.potentialEnergy === balance.potential,
      virialRatio: balance.virialRatio,
      averaged: average.records,
      code,
    }),
  );
} finally {
  await crew.close();
  await rm(folder, { recursive: true });
}
