/** Particles put together by hand, and plain loops to compare with. */
import { measureParticles } from '../../src/dynamics/measure.ts';
import type { MeasureRecord } from '../../src/dynamics/record.ts';
import type { MeasureOptions } from '../../src/dynamics/settings.ts';
import { makeModel, type MakeOptions } from '../../src/models/make.ts';
import { Random } from '../../src/numerics/random.ts';
import type { Softening } from '../../src/octree/softening.ts';
import { crewOfOne } from '../../src/parallel/crew.ts';
import { allocateColumn, type Particles } from '../../src/snapshot/particles.ts';
import { pairLaw } from '../octree/samples.ts';

export type Body = readonly [
  m: number,
  x: number,
  y: number,
  z: number,
  vx: number,
  vy: number,
  vz: number,
];

export function particlesOf(bodies: readonly Body[], rest: Partial<Particles> = {}): Particles {
  const columns = Array.from({ length: 7 }, (_, k) => {
    const column = allocateColumn(bodies.length);
    bodies.forEach((body, i) => (column[i] = body[k]));
    return column;
  });
  const [mass, x, y, z, vx, vy, vz] = columns;
  return {
    count: bodies.length,
    mass,
    x,
    y,
    z,
    vx,
    vy,
    vz,
    columns: {},
    componentNames: [],
    time: null,
    units: null,
    gravity: null,
    softening: null,
    frame: { kind: 'physical' },
    origin: { file: 'made.bin', format: 'made', mantissaBits: 53, remarks: [] },
    ...rest,
  };
}

export const bodiesOf = (p: Particles): Body[] =>
  Array.from(p.mass, (m, i) => [m, p.x[i], p.y[i], p.z[i], p.vx[i], p.vy[i], p.vz[i]]);

export function measure(particles: Particles, options: MeasureOptions = {}) {
  return measureParticles(particles, options, crewOfOne());
}

export function measureModel(
  model: MakeOptions['model'],
  count: number,
  seed: number,
  options: MeasureOptions = {},
  rest: Partial<MakeOptions> = {},
): Promise<MeasureRecord> {
  return measure(makeModel({ model, count, seed, ...rest }), options);
}

/** N bodies from normal deviates, masses uniform in (0, 1). */
export function cloud(count: number, seed: number, speed = 0.5): Body[] {
  const random = new Random(seed);
  const n = () => random.normal();
  return Array.from({ length: count }, () => {
    return [random.openUniform(), n(), n(), n(), speed * n(), speed * n(), speed * n()];
  });
}

/** T about the mean velocity, U and W by plain loops, G = 1. */
export function plainBalance(bodies: readonly Body[], softening: Softening) {
  const mass = bodies.reduce((sum, [m]) => sum + m, 0);
  const mean = (k: number) => bodies.reduce((sum, b) => sum + b[0] * b[k], 0) / mass;
  const [x, y, z, vx, vy, vz] = [1, 2, 3, 4, 5, 6].map(mean);
  let kinetic = 0;
  let inertia = 0;
  let rate = 0;
  const momentum = [0, 0, 0];
  let potential = 0;
  let clausius = 0;
  bodies.forEach((a, i) => {
    const d = [a[1] - x, a[2] - y, a[3] - z];
    const u = [a[4] - vx, a[5] - vy, a[6] - vz];
    kinetic += 0.5 * a[0] * (u[0] ** 2 + u[1] ** 2 + u[2] ** 2);
    inertia += a[0] * (d[0] ** 2 + d[1] ** 2 + d[2] ** 2);
    rate += 2 * a[0] * (d[0] * u[0] + d[1] * u[1] + d[2] * u[2]);
    momentum[0] += a[0] * (d[1] * u[2] - d[2] * u[1]);
    momentum[1] += a[0] * (d[2] * u[0] - d[0] * u[2]);
    momentum[2] += a[0] * (d[0] * u[1] - d[1] * u[0]);
    for (let j = 0; j < i; j++) {
      const b = bodies[j];
      const r = Math.hypot(a[1] - b[1], a[2] - b[2], a[3] - b[3]);
      const { f, s } = pairLaw(softening, r);
      potential -= a[0] * b[0] * f;
      clausius -= a[0] * b[0] * s * r * r;
    }
  });
  const centre = [x, y, z];
  const velocity = [vx, vy, vz];
  return { mass, kinetic, potential, clausius, inertia, rate, momentum, centre, velocity };
}
