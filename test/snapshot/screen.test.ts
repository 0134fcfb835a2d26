import { describe, expect, it } from 'vitest';
import type { FloatColumn, OptionalColumns, Particles } from '../../src/snapshot/particles.ts';
import { screenParticles } from '../../src/snapshot/screen.ts';

/** mulberry32, public domain; any scatter does here, it must only be the same in every run. */
function random(seed: number): () => number {
  let state = seed;
  return () => {
    state = (state + 0x6d2b79f5) | 0;
    let t = Math.imul(state ^ (state >>> 15), 1 | state);
    t = (t + Math.imul(t ^ (t >>> 7), 61 | t)) ^ t;
    return ((t ^ (t >>> 14)) >>> 0) / 4294967296;
  };
}

const NAMES = ['mass', 'x', 'y', 'z', 'vx', 'vy', 'vz'] as const;
type Seven = Record<(typeof NAMES)[number], FloatColumn>;

/** A cloud whose radii spread like those of real models: r = 1/√(u^(-2/3) − 1) (Plummer 1911). */
function cloud(n: number, length = 1, speed = 1, mass = 1 / n): Seven {
  const draw = random(n);
  const seven = Object.fromEntries(NAMES.map((name) => [name, new Float64Array(n)])) as Seven;
  for (let i = 0; i < n; i++) {
    const r = length / Math.sqrt(draw() ** (-2 / 3) - 1);
    const [mu, phi, nu, psi] = [2 * draw() - 1, 2 * Math.PI * draw(), 2 * draw() - 1, 7 * draw()];
    const v = speed * draw();
    seven.mass[i] = mass;
    seven.x[i] = r * Math.sqrt(1 - mu * mu) * Math.cos(phi);
    seven.y[i] = r * Math.sqrt(1 - mu * mu) * Math.sin(phi);
    seven.z[i] = r * mu;
    seven.vx[i] = v * Math.sqrt(1 - nu * nu) * Math.cos(psi);
    seven.vy[i] = v * Math.sqrt(1 - nu * nu) * Math.sin(psi);
    seven.vz[i] = v * nu;
  }
  return seven;
}

function particlesOf(seven: Seven, columns: OptionalColumns = {}): Particles {
  return {
    count: seven.mass.length,
    ...seven,
    columns,
    componentNames: [],
    time: null,
    units: null,
    gravity: null,
    softening: null,
    frame: { kind: 'physical' },
    origin: { file: 'larkhill.bin', format: 'made', mantissaBits: 53, remarks: [] },
  };
}

/** The bytes of the columns written body by body, then read as another layout would. */
function reread(
  seven: Seven,
  write: 'f64' | 'f32',
  read: 'f64' | 'f32' | 'swapped64' | 'swapped32',
  columns = false,
): Seven {
  const n = seven.mass.length;
  const rows = columns
    ? NAMES.flatMap((name) => [...seven[name]])
    : Array.from({ length: n }, (_, i) => NAMES.map((name) => seven[name][i])).flat();
  const bytes = Buffer.from((write === 'f64' ? Float64Array : Float32Array).from(rows).buffer);
  if (read.startsWith('swapped')) {
    if (write === 'f64') bytes.swap64();
    else bytes.swap32();
  }
  const flat = read.endsWith('64')
    ? new Float64Array(bytes.buffer, bytes.byteOffset, Math.floor(bytes.length / 8))
    : new Float32Array(bytes.buffer, bytes.byteOffset, bytes.length / 4);
  const count = Math.floor(flat.length / 7);
  const column = (k: number): FloatColumn =>
    flat.slice(0, count).map((_, i) => (columns ? flat[k * count + i] : flat[7 * i + k]));
  return Object.fromEntries(NAMES.map((name, k) => [name, column(k)])) as Seven;
}

describe('what passes', () => {
  const cases: [string, () => Seven][] = [
    ['a usual cloud', () => cloud(1000)],
    ['one body', () => cloud(1)],
    ['two bodies', () => cloud(2)],
    [
      'masses over 12 decades',
      () => ({ ...cloud(500), mass: cloud(500).mass.map((_, i) => 10 ** ((i % 121) / 10 - 6)) }),
    ],
    [
      'tracers without mass',
      () => ({ ...cloud(500), mass: cloud(500).mass.map((m, i) => (i % 2 ? 0 : m)) }),
    ],
    [
      'an outlier at 1e12',
      () => ({ ...cloud(500), x: cloud(500).x.map((x, i) => (i === 7 ? 1e12 : x)) }),
    ],
    ['velocities all zero', () => cloud(500, 1, 0)],
    ['SI units of a galaxy cluster', () => cloud(500, 1e25, 1e6, 1e45)],
    ['SI units of a moon', () => cloud(500, 1e3, 1e-3, 1e10)],
    [
      'a cusp with radii over 9 decades',
      () => {
        const c = cloud(2000);
        const scale = c.x.map((_, i) => 10 ** (-9 * ((i * 0.618034) % 1)));
        const at = (column: FloatColumn, power: number) =>
          column.map((v, i) => v * scale[i] ** power);
        return {
          ...c,
          x: at(c.x, 1),
          y: at(c.y, 1),
          z: at(c.z, 1),
          vx: at(c.vx, -0.5),
          vy: at(c.vy, -0.5),
          vz: at(c.vz, -0.5),
        };
      },
    ],
    [
      'a plane whose z is rounding errors',
      () => ({ ...cloud(500), z: cloud(500).z.map((z, i) => z * (i % 2 ? 1e-17 : 1e-40)) }),
    ],
    ['float32 columns', () => reread(cloud(500), 'f32', 'f32')],
    [
      'all bodies on a line',
      () => ({ ...cloud(50), y: new Float64Array(50), z: new Float64Array(50) }),
    ],
  ];
  it.each(cases)('%s', (_, make) => {
    expect(() => screenParticles(particlesOf(make()))).not.toThrow();
  });
});

describe('what is refused', () => {
  const put = (name: keyof Seven, at: number, ...values: number[]): Seven => {
    const seven = cloud(100);
    values.forEach((value, k) => (seven[name][at + k] = value));
    return seven;
  };
  const fill = (name: keyof Seven, value: number): Seven => ({
    ...cloud(100),
    [name]: new Float64Array(100).fill(value),
  });
  const point = { ...fill('x', 2), y: new Float64Array(100), z: new Float64Array(100) };
  const cases: [string, Seven, OptionalColumns, string, string[]][] = [
    [
      'NaN',
      put('vy', 7, NaN, NaN, Infinity),
      {},
      'input.notFinite',
      ['vy of body 7 is NaN', 'first of 3'],
    ],
    ['infinity', put('z', 99, -Infinity), {}, 'input.notFinite', ['z of body 99 is -Infinity']],
    [
      'a run that broke down',
      fill('x', NaN),
      {},
      'input.notFinite',
      ['x of body 0 is NaN', 'first of 100'],
    ],
    [
      'NaN in a column that was asked for',
      cloud(100),
      { potential: new Float64Array(100).fill(NaN, 3) },
      'input.notFinite',
      ['potential of body 3', 'first of 97'],
    ],
    [
      'NaN of an acceleration',
      cloud(2),
      {
        acceleration: {
          x: Float64Array.of(1, 2),
          y: Float64Array.of(1, NaN),
          z: Float64Array.of(1, 2),
        },
      },
      'input.notFinite',
      ['ay of body 1'],
    ],
    [
      'a negative mass',
      put('mass', 4, -1, -2),
      {},
      'input.negativeMass',
      ['mass of body 4 is -1', 'first of 2'],
    ],
    ['no mass', fill('mass', 0), {}, 'input.zeroMass', ['all 100 masses are 0']],
    ['one point', point, {}, 'input.onePoint', ['all 100 bodies', '(2, 0, 0)']],
    [
      'a negative softening',
      cloud(100),
      { softening: new Float64Array(100).fill(-1, 9) },
      'input.negativeSoftening',
      ['softening of body 9 is -1', 'first of 91'],
    ],
    [
      'a number whose square is infinite',
      put('x', 5, 1e200),
      {},
      'input.outOfRange',
      ['x of body 5 is 1e+200', '1e+150'],
    ],
  ];
  it.each(cases)('%s', (_, seven, columns, code, parts) => {
    let error: unknown;
    try {
      screenParticles(particlesOf(seven, columns));
    } catch (thrown) {
      error = thrown;
    }
    expect(error).toMatchObject({ name: 'InputError', code, remedy: expect.any(String) as string });
    const { message } = error as { message: string };
    for (const part of ['larkhill.bin', 'expected', ...parts]) expect(message).toContain(part);
  });
});

describe('numbers read wrongly', () => {
  const n = 2000;
  const cases: [string, Seven, string][] = [
    [
      'the other byte order',
      reread(cloud(n), 'f64', 'swapped64'),
      'the byte order is the other one',
    ],
    [
      'the other byte order in SI',
      reread(cloud(n, 1e20, 1e5, 1e38), 'f64', 'swapped64'),
      'the byte order is the other one',
    ],
    [
      'the other byte order of numbers that were float32 once',
      reread(reread(cloud(n), 'f32', 'f32'), 'f64', 'swapped64'),
      'the byte order is the other one',
    ],
    [
      'the other byte order of float32',
      reread(cloud(n), 'f32', 'swapped32'),
      'the byte order is the other one',
    ],
    [
      'float32 as float64, body by body',
      reread(cloud(n), 'f32', 'f64'),
      'they are float32 and were read as float64',
    ],
    [
      'float32 as float64, in blocks',
      reread(cloud(n), 'f32', 'f64', true),
      'they are float32 and were read as float64',
    ],
    [
      'float64 as float32',
      reread(cloud(n), 'f64', 'f32'),
      'they are float64 and were read as float32',
    ],
  ];
  it.each(cases)('names the cause: %s', (_, seven, cause) => {
    expect(() => screenParticles(particlesOf(seven))).toThrow(
      expect.objectContaining({
        code: 'input.misread',
        message: expect.stringContaining(cause) as string,
        remedy: expect.stringContaining('byteOrder or types') as string,
      }),
    );
  });
});
