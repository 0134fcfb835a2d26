/** Timing, exact sums and tables for the benchmarks. */

/** Runs once to warm up, then `repeats` times; the least time and the last result. */
export async function least(repeats, work) {
  let result = await work();
  let seconds = Infinity;
  for (let k = 0; k < repeats; k++) {
    const start = performance.now();
    result = await work();
    seconds = Math.min(seconds, (performance.now() - start) / 1000);
  }
  return { seconds, result };
}

/** Plain direct sums Σ m/r at bodies spread over the set, with the seconds they took. */
export function exactSums({ x, y, z, mass, count }, wanted) {
  const start = performance.now();
  const sums = [];
  for (let k = 0; k < wanted; k++) {
    const i = Math.floor(((k + 0.5) * count) / wanted);
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
  return sums;
}

/** Prints rows under heads, aligned to the right. */
export function printTable(rows, columns) {
  const table = [
    columns.map(([head]) => head),
    ...rows.map((row) => columns.map(([, text]) => text(row))),
  ];
  const widths = columns.map((_, k) => Math.max(...table.map((line) => line[k].length)));
  for (const line of table) {
    console.log(line.map((text, k) => text.padStart(widths[k])).join('  '));
  }
  console.log('');
}
