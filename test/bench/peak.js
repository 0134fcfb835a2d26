/**
 * Measures one file (or `few`: 5000 made bodies) in this fresh process, and prints as JSON its peak
 * resident memory, the seconds of the record's parts, and those since the process began.
 */
import { measureParticles } from '../../dist/dynamics/measure.js';
import { makeModel } from '../../dist/models/make.js';
import { startCrew } from '../../dist/parallel/crew.js';
import { measureFile } from '../../dist/survey/measure.js';
import { peakMemory } from './tools.js';

const [file, threads, options] = process.argv.slice(2);
const crew = startCrew(Number(threads));
const record =
  file === 'few'
    ? await measureParticles(
        makeModel({ model: 'plummer', count: 5000, seed: 1, masses: 'equal' }),
        {},
        crew,
      )
    : await measureFile(file, JSON.parse(options), crew);
await crew.close();
const seconds = { ...record.engine.seconds, process: performance.now() / 1000 };
console.log(JSON.stringify({ peak: await peakMemory(), seconds }));
