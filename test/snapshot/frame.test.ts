/** Comoving and periodic coordinates: against motions known in physical ones. */
import { describe, expect, it } from 'vitest';
import { makeModel } from '../../src/models/make.ts';
import { Random } from '../../src/numerics/random.ts';
import { toPhysical, unwrap } from '../../src/snapshot/frame.ts';
import type { Frame, Particles, VelocityForm } from '../../src/snapshot/particles.ts';
import { VELOCITY_FORMS } from '../../src/snapshot/particles.ts';
import { frameOf } from '../../src/snapshot/raw/frame.ts';
import { checkLayout } from '../../src/snapshot/raw/layout-check.ts';
import type { LayoutInput } from '../../src/snapshot/raw/layout.ts';
import { bodiesOf, cloud, measure, particlesOf, type Body } from '../dynamics/samples.ts';
import { VECTORS } from './raw/samples.ts';

type Comoving = Extract<Frame, { kind: 'comoving' }>;
const SEVEN = ['mass', 'x', 'y', 'z', 'vx', 'vy', 'vz'] as const;

/**
 * What a cosmological code writes of bodies at physical r with physical velocities v: x = r/a, and
 * from dx/dt = (v − H r)/a the form of velocity asked for. Source: definition of comoving position.
 */
function written(bodies: readonly Body[], frame: Comoving, shift = 0): Particles {
  const { scaleFactor: a, hubbleRate: H, velocity, boxSize } = frame;
  const form: Readonly<Record<VelocityForm, (r: number, rate: number) => number>> = {
    'a dx/dt': (_, rate) => a * rate,
    'dx/dt': (_, rate) => rate,
    'a^2 dx/dt': (_, rate) => a * a * rate,
    'sqrt(a) dx/dt': (_, rate) => Math.sqrt(a) * rate,
    'd(ax)/dt': (r, rate) => a * rate + H * r,
  };
  return particlesOf(
    bodies.map(([m, ...rest]) => {
      const r = rest.slice(0, 3).map((value) => value + a * shift);
      const x = r.map((value) => value / a);
      const inBox = x.map((value) =>
        boxSize === null ? value : value - boxSize * Math.floor(value / boxSize),
      );
      const v = rest.slice(3).map((value, k) => {
        const rate = (value + H * a * shift - H * r[k]) / a;
        return form[velocity](a * inBox[k], rate);
      });
      return [m, ...inBox, ...v] as unknown as Body;
    }),
    { frame },
  );
}

const CLOUD = cloud(40, 5);

describe('toPhysical', () => {
  it('gives physical particles back as they are', () => {
    const particles = particlesOf(CLOUD);
    expect(toPhysical(particles)).toBe(particles);
  });

  it.each(VELOCITY_FORMS)('finds places and velocities again from %s', (velocity) => {
    const frame = {
      kind: 'comoving',
      scaleFactor: 0.2,
      hubbleRate: 3,
      velocity,
      boxSize: null,
    } as const;
    const physical = toPhysical(written(CLOUD, frame));
    expect(physical.frame).toEqual({ kind: 'physical' });
    expect(physical.origin.remarks.map(({ code }) => code)).toEqual(['comoving']);
    // Velocities are about the centre of mass instead of the origin: they differ by H r_c.
    const mass = CLOUD.reduce((sum, [m]) => sum + m, 0);
    for (const [k, name] of SEVEN.entries()) {
      const flow =
        k < 4 ? 0 : (3 * CLOUD.reduce((sum, body) => sum + body[0] * body[k - 3], 0)) / mass;
      CLOUD.forEach((body, i) => expect(physical[name][i]).toBeCloseTo(body[k] - flow, 12));
    }
  });

  it('gives bodies that only follow the expansion the velocity H r', () => {
    const frame = {
      kind: 'comoving',
      scaleFactor: 0.5,
      hubbleRate: 70,
      velocity: 'a dx/dt',
      boxSize: null,
    } as const;
    const bodies: Body[] = [
      [1, 0, 0, 0, 0, 0, 0],
      [3, 4, 0, -8, 0, 0, 0],
    ];
    const { x, z, vx, vz } = toPhysical(particlesOf(bodies, { frame }));
    expect([...x]).toEqual([0, 2]);
    expect([...z]).toEqual([0, -4]);
    // Centre of mass at x = 1.5, z = −3.
    expect([...vx]).toEqual([70 * -1.5, 70 * 0.5]);
    expect([...vz]).toEqual([70 * 3, 70 * -1]);
  });

  it('scales softening lengths, and leaves out what the file does not say the frame of', () => {
    const frame = {
      kind: 'comoving',
      scaleFactor: 0.5,
      hubbleRate: 0,
      velocity: 'dx/dt',
      boxSize: null,
    } as const;
    const made = particlesOf(CLOUD.slice(0, 2), { frame, softening: 0.25 });
    const columns = { softening: Float64Array.of(1, 2), potential: Float64Array.of(-1, -1) };
    const physical = toPhysical({ ...made, columns });
    expect(physical.softening).toBe(0.125);
    expect([...(physical.columns.softening ?? [])]).toEqual([0.5, 1]);
    expect(physical.columns.potential).toBeUndefined();
  });
});

describe('a periodic box', () => {
  const frame = {
    kind: 'comoving',
    scaleFactor: 0.25,
    hubbleRate: 0.5,
    velocity: 'sqrt(a) dx/dt',
    boxSize: 200,
  } as const;
  // 500 bodies are summed directly, so that nothing but rounding differs.
  const made = makeModel({ model: 'plummer', count: 500, seed: 3 });
  // A Plummer sphere has no edge: some of its bodies are farther out than the box is wide.
  const plummer = bodiesOf(made).filter(([, x, y, z]) => Math.hypot(x, y, z) < 10);

  it('is no matter for an object that its edges cut: the record is that of the object alone', async () => {
    const alone = await measure(particlesOf(plummer));
    // In the middle, over a face, and over a corner.
    for (const shift of [100, 199, 0]) {
      const particles = written(plummer, frame, shift);
      const cut = await measure(particles);
      expect(cut.whole.potential / alone.whole.potential).toBeCloseTo(1, 11);
      expect(cut.whole.kinetic / alone.whole.kinetic).toBeCloseTo(1, 11);
      expect((cut.halfMassRadius ?? 0) / (alone.halfMassRadius ?? 1)).toBeCloseTo(1, 10);
    }
  });

  it('that is full is refused, with its edge, the reason and what to do', async () => {
    const random = new Random(8);
    const uniform = Array.from({ length: 300 }, (): Body => {
      return [1, 200 * random.uniform(), 200 * random.uniform(), 200 * random.uniform(), 0, 0, 0];
    });
    await expect(measure(particlesOf(uniform, { frame }))).rejects.toMatchObject({
      name: 'UnanswerableError',
      code: 'unanswerable.periodicBox',
      message: expect.stringMatching(/made\.bin.*edge 200.*single object/) as string,
      remedy: expect.stringContaining('--within') as string,
    });
  });

  it('draws the line at half of the box', () => {
    const two = (apart: number): Body[] => [
      [1, 190, 5, 5, 0, 0, 0],
      [1, (190 + apart) % 200, 5, 5, 0, 0, 0],
    ];
    const { x, span } = unwrap(particlesOf(two(99)), 200);
    expect(Math.abs(x[1] - x[0])).toBeCloseTo(99, 10);
    expect(span).toBeCloseTo(0.495, 12);
    expect(() => toPhysical(particlesOf(two(99), { frame }))).not.toThrow();
    expect(() => toPhysical(particlesOf([...two(99), ...two(140)], { frame }))).toThrow('half');
  });

  it('leaves forces of the file aside', async () => {
    const particles = written(plummer.slice(0, 9), frame, 100);
    const withForces = { ...particles, columns: { potential: new Float64Array(9).fill(-1) } };
    await expect(measure(withForces, { forces: 'file' })).rejects.toMatchObject({
      code: 'input.fileForces',
      message: expect.stringContaining('comoving') as string,
    });
  });
});

describe('the key "comoving" of a layout', () => {
  const layoutOf = (comoving: NonNullable<LayoutInput['comoving']>, header: string[] = []) =>
    checkLayout(
      {
        settlemark: 'layout/1',
        headerBytes: 64,
        header: header.map((name, k) => ({ name, type: 'float64', offset: 8 * k })),
        fields: VECTORS,
        comoving,
      },
      'l.json',
    );
  const frameIn = (
    comoving: NonNullable<LayoutInput['comoving']>,
    header: Record<string, number> = {},
  ) =>
    frameOf('a.bin', {
      layout: layoutOf(comoving, Object.keys(header)),
      header: new Map(Object.entries(header)),
    });

  it('takes values of the header, with scales', () => {
    expect(
      frameIn(
        {
          redshift: { header: 'z' },
          hubbleRate: { header: 'rate', scale: 0.1 },
          boxSize: { header: 'edge', scale: 1000 },
          velocity: 'dx/dt',
        },
        { z: 3, rate: 50, edge: 0.1 },
      ),
    ).toEqual({
      kind: 'comoving',
      scaleFactor: 0.25,
      hubbleRate: 5,
      boxSize: 100,
      velocity: 'dx/dt',
    });
  });

  it('finds H from today, as the closed form of flat models with dark energy has it', () => {
    // a(t) = (Ωm/ΩΛ)^⅓ sinh^⅔(1.5 √ΩΛ H₀ t), so that H = √ΩΛ H₀ coth(1.5 √ΩΛ H₀ t).
    // Source: Peebles 1993, Principles of Physical Cosmology, ch. 13 (from memory).
    const [today, matter] = [70, 0.3];
    const dark = 1 - matter;
    for (const t of [0.001, 0.005, 0.01]) {
      const phase = 1.5 * Math.sqrt(dark) * today * t;
      const a = Math.cbrt((matter / dark) * Math.sinh(phase) ** 2);
      const frame = frameIn({
        scaleFactor: a,
        hubbleConstant: today,
        matterDensity: matter,
        velocity: 'dx/dt',
      });
      const expected = (Math.sqrt(dark) * today) / Math.tanh(phase);
      expect((frame as Comoving).hubbleRate / expected).toBeCloseTo(1, 12);
    }
    // Without matter, curved: the empty universe of Milne, H = H₀/a. Source: from memory.
    const milne = {
      scaleFactor: 0.2,
      hubbleConstant: 70,
      matterDensity: 0,
      darkEnergyDensity: 0,
      velocity: 'dx/dt',
    } as const;
    expect((frameIn(milne) as Comoving).hubbleRate).toBeCloseTo(350, 9);
  });

  const complete = { scaleFactor: 1, hubbleRate: 0, velocity: 'dx/dt' } as const;
  it.each([
    ['both a and z', { ...complete, redshift: 0 }, 'both scaleFactor and redshift'],
    ['neither', { hubbleRate: 1, velocity: 'dx/dt' }, 'neither scaleFactor nor redshift'],
    ['no H', { scaleFactor: 1, velocity: 'dx/dt' }, 'no rate of expansion'],
    ['H twice', { ...complete, hubbleConstant: 70 }, 'comoving.hubbleRate'],
    ['no item', { ...complete, boxSize: { header: 'edge' } }, 'edge'],
    ['no form of velocity', { scaleFactor: 1, hubbleRate: 0 }, 'velocity'],
    ['a misspelt key', { ...complete, boxsize: 3 }, '"boxsize"'],
  ])('is refused with %s', (_, comoving, text) => {
    expect(() => layoutOf(comoving as typeof complete)).toThrow(
      expect.objectContaining({
        code: 'input.layoutInvalid',
        message: expect.stringContaining(text) as string,
      }),
    );
  });

  it.each([
    [{ scaleFactor: { header: 'v' }, hubbleRate: 1 }, 0, 'scaleFactor'],
    [{ redshift: { header: 'v' }, hubbleRate: 1 }, -1, 'redshift'],
    [{ scaleFactor: 1, hubbleRate: { header: 'v' } }, NaN, 'hubbleRate'],
    [{ scaleFactor: 1, hubbleRate: 1, boxSize: { header: 'v' } }, -5, 'boxSize'],
    [
      { scaleFactor: { header: 'v' }, hubbleConstant: 1, matterDensity: -2, darkEnergyDensity: 1 },
      0.5,
      'no expansion at a = 0.5',
    ],
  ])('refuses what cannot be: %j with %d', (comoving, value, text) => {
    expect(() => frameIn({ ...comoving, velocity: 'dx/dt' }, { v: value })).toThrow(
      expect.objectContaining({
        code: 'input.headerValue',
        message: expect.stringMatching(new RegExp(`^a\\.bin: .*${text}`)) as string,
      }),
    );
  });
});
