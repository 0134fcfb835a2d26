/** Small correct runs, integrated here by plain sums: nothing of the program's own forces. */
import type { ComparedRun } from '../../src/gate/compareRun.ts';
import { Random } from '../../src/numerics/random.ts';

const SOFTENING2 = 0.01;

/** A Plummer sphere (G = M = a = 1; recipe of Aarseth, Hénon & Wielen 1974) run for about one crossing time. */
export function smallRun(seed: number, count = 32, gravity = 1): ComparedRun {
  const random = new Random(seed);
  const x = new Float64Array(3 * count);
  const v = new Float64Array(3 * count);
  const direction = (size: number, to: Float64Array, i: number) => {
    const z = 2 * random.uniform() - 1;
    const angle = 2 * Math.PI * random.uniform();
    const flat = Math.sqrt(1 - z * z);
    to.set([size * flat * Math.cos(angle), size * flat * Math.sin(angle), size * z], 3 * i);
  };
  for (let i = 0; i < count; i++) {
    const r = 1 / Math.sqrt((0.999 * random.uniform() + 5e-4) ** (-2 / 3) - 1);
    let q = 0;
    while (0.1 * random.uniform() > q * q * (1 - q * q) ** 3.5 || q === 0) q = random.uniform();
    direction(r, x, i);
    direction(q * Math.SQRT2 * (1 + r * r) ** -0.25, v, i);
  }
  const mass = 1 / count;
  const a = new Float64Array(3 * count);
  const forces = (): { u: number; w: number } => {
    a.fill(0);
    let [u, w] = [0, 0];
    for (let i = 0; i < count; i++) {
      for (let j = 0; j < i; j++) {
        const d = [0, 1, 2].map((k) => x[3 * i + k] - x[3 * j + k]);
        const r2 = d[0] ** 2 + d[1] ** 2 + d[2] ** 2;
        const s = r2 + SOFTENING2;
        const pull = (gravity * mass) / (s * Math.sqrt(s));
        for (let k = 0; k < 3; k++) {
          a[3 * i + k] -= pull * d[k];
          a[3 * j + k] += pull * d[k];
        }
        u -= (mass * mass) / Math.sqrt(s);
        w -= (mass * mass * r2) / (s * Math.sqrt(s));
      }
    }
    return { u, w };
  };
  const times: number[] = [];
  const values: Record<string, number[]> = { ratio: [], 'lagrangian[0.5]': [], virialRadius: [] };
  let { u, w } = forces();
  for (let step = 0; step <= 120; step++) {
    if (step % 10 === 0) {
      const kinetic = v.reduce((sum, value) => sum + (mass * value * value) / 2, 0);
      const radii = Array.from({ length: count }, (_, i) =>
        Math.hypot(x[3 * i], x[3 * i + 1], x[3 * i + 2]),
      ).sort((p, q) => p - q);
      times.push(step * 0.05);
      values['ratio'].push((2 * kinetic) / -w);
      values['lagrangian[0.5]'].push(Math.log(radii[count >> 1]));
      values['virialRadius'].push(Math.log(-1 / (2 * u)));
    }
    for (let k = 0; k < v.length; k++) {
      v[k] += a[k] * 0.025;
      x[k] += v[k] * 0.05;
    }
    ({ u, w } = forces());
    for (let k = 0; k < v.length; k++) v[k] += a[k] * 0.025;
  }
  return {
    name: `seed ${seed}`,
    setup: {
      particles: count,
      effectiveNumber: count,
      mass: 1,
      gravity: 1,
      units: 'natural',
      softening: { length: 0.1, kernel: 'plummer' },
    },
    crossingTime: 6.3,
    sampling: { inner: null, half: null },
    times,
    values,
  };
}
