/** Measures all files of a folder in this fresh process; prints seconds and memory as JSON. */
import { readdir } from 'node:fs/promises';
import { join } from 'node:path';
import { startCrew } from '../../dist/parallel/crew.js';
import { measureMany } from '../../dist/survey/many.js';
import { peakMemory } from './tools.js';

const [folder, threads] = process.argv.slice(2);
const files = (await readdir(folder)).toSorted().map((name) => join(folder, name));
const startSeconds = performance.now() / 1000;
const crew = startCrew(Number(threads));
let [totalSeconds, readSeconds, done, peakBytesAtTenth] = [0, 0, 0, 0];
for await (const { record, error } of measureMany(files, {}, crew)) {
  if (error) throw error;
  totalSeconds += record.engine.seconds.total;
  readSeconds += record.engine.seconds.read;
  done++;
  if (done === Math.ceil(files.length / 10)) peakBytesAtTenth = await peakMemory();
}
const seconds = performance.now() / 1000 - startSeconds;
await crew.close();
const peakBytes = await peakMemory();
console.log(
  JSON.stringify({
    seconds,
    startSeconds,
    totalSeconds,
    readSeconds,
    peakBytes,
    peakBytesAtTenth,
  }),
);
