/** Timing, exact sums, processes of their own and tables for the benchmarks. */
import { execFileSync } from 'node:child_process';
import { readFile } from 'node:fs/promises';
import { fileURLToPath } from 'node:url';

/**
 * Runs once to warm up, then `repeats` times; the least time and the result that went with it.
 * Without repeats the first run counts: for work so long that it warms up within itself.
 */
export async function least(repeats, work) {
  let fastest = repeats > 0 ? (await work(), { seconds: Infinity, result: null }) : null;
  for (let k = 0; k < Math.max(1, repeats); k++) {
    const start = performance.now();
    const result = await work();
    const seconds = (performance.now() - start) / 1000;
    if (fastest === null || seconds < fastest.seconds) fastest = { seconds, result };
  }
  return fastest;
}

/** Indices of `wanted` bodies spread over the set. */
export function spread(count, wanted) {
  return Array.from({ length: wanted }, (_, k) => Math.floor(((k + 0.5) * count) / wanted));
}

/** Plain direct sums Σ m/r at bodies spread over the set, with the seconds they took. */
export function exactSums({ x, y, z, mass, count }, wanted) {
  const start = performance.now();
  const sums = [];
  for (const i of spread(count, wanted)) {
    let phi = 0;
    for (let j = 0; j < count; j++) {
      if (j === i) continue;
      const dx = x[j] - x[i];
      const dy = y[j] - y[i];
      const dz = z[j] - z[i];
      phi += mass[j] / Math.sqrt(dx * dx + dy * dy + dz * dz);
    }
    sums.push({ body: i, phi });
  }
  sums.seconds = (performance.now() - start) / 1000;
  sums.mean = sums.reduce((sum, { phi }) => sum + phi, 0) / wanted;
  return sums;
}

/** Direct Σ m r⃗/r³ at bodies spread over the set. */
export function exactAccelerations({ x, y, z, mass, count }, wanted) {
  return spread(count, wanted).map((i) => {
    const a = [0, 0, 0];
    for (let j = 0; j < count; j++) {
      if (j === i) continue;
      const dx = x[j] - x[i];
      const dy = y[j] - y[i];
      const dz = z[j] - z[i];
      const r2 = dx * dx + dy * dy + dz * dz;
      const f = mass[j] / (r2 * Math.sqrt(r2));
      a[0] += f * dx;
      a[1] += f * dy;
      a[2] += f * dz;
    }
    return { body: i, a };
  });
}

export function rms(values) {
  return Math.sqrt(values.reduce((sum, v) => sum + v * v, 0) / values.length);
}

/** Runs a script of this folder in a fresh process; it prints one JSON value. */
export function inFreshProcess(script, ...scriptArguments) {
  const path = fileURLToPath(new URL(script, import.meta.url));
  const node = ['--max-old-space-size=8192', path, ...scriptArguments.map(String)];
  const printed = execFileSync(process.execPath, node, { stdio: ['ignore', 'pipe', 'inherit'] });
  return JSON.parse(printed.toString());
}

/** Peak resident memory of this process [bytes]; resourceUsage().maxRSS starts with the parent's. */
export async function peakMemory() {
  const status = await readFile('/proc/self/status', 'utf8');
  return Number(/VmHWM:\s+(\d+) kB/.exec(status)?.[1]) * 1024;
}

/** Prints rows under heads, aligned to the right; a value that was not measured is a dash. */
export function printTable(rows, columns) {
  const table = [
    columns.map(([head]) => head),
    ...rows.map((row) => columns.map(([, text]) => text(row) ?? '–')),
  ];
  const widths = columns.map((_, k) => Math.max(...table.map((line) => line[k].length)));
  for (const line of table) {
    console.log(line.map((text, k) => text.padStart(widths[k])).join('  '));
  }
  console.log('');
}
