/** Measures one file (or 1,000 made bodies) and prints the peak resident memory of this process. */
import { readFile } from 'node:fs/promises';
import { measureParticles } from '../../dist/dynamics/measure.js';
import { makeModel } from '../../dist/models/make.js';
import { startCrew } from '../../dist/parallel/crew.js';
import { readSnapshot } from '../../dist/snapshot/read.js';

const [file, threads] = process.argv.slice(2);
const crew = startCrew(Number(threads));
const particles =
  file === 'few'
    ? makeModel({ model: 'plummer', count: 5000, seed: 1, masses: 'equal' })
    : await readSnapshot(file, {});
await measureParticles(particles, {}, crew);
await crew.close();
// Not resourceUsage().maxRSS: a child starts with its parent's.
const status = await readFile('/proc/self/status', 'utf8');
console.log(Number(/VmHWM:\s+(\d+) kB/.exec(status)?.[1]) * 1024);
