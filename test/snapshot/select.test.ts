/** Some of the bodies of a snapshot. */
import { join } from 'node:path';
import { beforeEach, describe, expect, it } from 'vitest';
import { Random } from '../../src/numerics/random.ts';
import type { Particles } from '../../src/snapshot/particles.ts';
import { writeArrow } from '../../src/snapshot/arrow/write.ts';
import { readSnapshot } from '../../src/snapshot/read.ts';
import { selectBodies } from '../../src/snapshot/select.ts';
import { bodiesOf, cloud, measure, particlesOf, type Body } from '../dynamics/samples.ts';
import { body, f64, newFolder, put, putLayout } from './raw/samples.ts';

let folder: string;
beforeEach(async () => {
  folder = await newFolder();
});

const PLAIN = cloud(60, 4);
/** Every third body is of the component "stars", the others of "dark". */
const mixed = (rest: Partial<Particles> = {}): Particles => ({
  ...particlesOf(PLAIN, { componentNames: ['dark', 'stars'], ...rest }),
  columns: {
    component: Uint16Array.from(PLAIN, (_, i) => (i % 3 === 0 ? 1 : 0)),
    group: BigInt64Array.from(PLAIN, (_, i) => 2n ** 53n + BigInt(i % 2)),
    softening: Float64Array.from(PLAIN, (_, i) => i),
    potential: new Float64Array(PLAIN.length).fill(-1),
  },
});
const all = [...PLAIN.keys()];

describe('selectBodies', () => {
  it('by component keeps their order and their columns, and not the forces of all', () => {
    const { particles, indices } = selectBodies(mixed(), { only: 'stars' });
    const stars = all.filter((i) => i % 3 === 0);
    expect([...indices]).toEqual(stars);
    expect(bodiesOf(particles)).toEqual(stars.map((i) => PLAIN[i]));
    expect([...(particles.columns.softening ?? [])]).toEqual(stars);
    expect(particles.columns.potential).toBeUndefined();
    expect(particles.origin.selection).toEqual({
      only: 'stars',
      group: null,
      within: null,
      about: null,
      of: 60,
    });
  });

  it('by group, exactly beyond 2^53', () => {
    const { indices } = selectBodies(mixed(), { group: 2n ** 53n + 1n });
    expect([...indices]).toEqual(all.filter((i) => i % 2 === 1));
  });

  it('by radius about a place, the edge belonging to it', () => {
    const row: Body[] = [0, 1, 2, 3].map((x) => [1, x, 0, 0, 0, 0, 0]);
    const { indices } = selectBodies(particlesOf(row), { within: 1, about: [2, 0, 0] });
    expect([...indices]).toEqual([1, 2, 3]);
  });

  it('by radius about the densest place if none is given', () => {
    // A clump of a third of the bodies in a background of uniform density around it.
    const random = new Random(12);
    const clump = cloud(400, 9).map((b): Body => [1, 5 + b[1] / 4, b[2] / 4, b[3] / 4, 0, 0, 0]);
    const side = () => 20 * random.uniform() - 10;
    const around = Array.from({ length: 800 }, (): Body => {
      return [1, 5 + side(), side(), side(), 0, 0, 0];
    });
    const { particles } = selectBodies(particlesOf([...clump, ...around]), { within: 1 });
    const about = particles.origin.selection?.about ?? [0, 0, 0];
    // A clump of width 1/4 of 400 bodies is known to 1/4/√400 a coordinate; ten times that.
    expect(Math.hypot(about[0] - 5, about[1], about[2])).toBeLessThan(0.13);
  });

  it('by radius across the edges of a periodic box', () => {
    const frame = {
      kind: 'comoving',
      scaleFactor: 0.5,
      hubbleRate: 0,
      velocity: 'dx/dt',
      boxSize: 10,
    } as const;
    const row: Body[] = [0.5, 4, 8, 9.5].map((x) => [1, x, 9.9, 0.1, 0, 0, 0]);
    const particles = particlesOf(row, { frame });
    const { indices } = selectBodies(particles, { within: 1, about: [0, 0, 0] });
    expect([...indices]).toEqual([0, 3]);
    // Bodies all over the box have no densest place that the median would lead to.
    const uniform = particlesOf(
      Array.from({ length: 50 }, (_, i): Body => [1, i / 5, (i * 3) % 10, (i * 7) % 10, 0, 0, 0]),
      { frame },
    );
    expect(() => selectBodies(uniform, { within: 1 })).toThrow(
      expect.objectContaining({ code: 'usage.about' }),
    );
  });

  it('joins what is asked for: a component, and of it what is near', () => {
    const { indices, particles } = selectBodies(mixed(), {
      only: 'stars',
      within: 1.5,
      about: [0, 0, 0],
    });
    const near = all.filter((i) => i % 3 === 0 && Math.hypot(...PLAIN[i].slice(1, 4)) <= 1.5);
    expect(near.length).toBeGreaterThan(3);
    expect([...indices]).toEqual(near);
    expect(particles.origin.remarks.at(-1)).toMatchObject({ code: 'selection' });
  });

  it.each([
    [{ only: 'star' }, 'input.unknownComponent', 'no component "star"', 'mean "stars"'],
    [{ within: 0 }, 'usage.range', '--within 0', 'above 0'],
    [{ about: [0, 0, 0] as const }, 'usage.about', '--about 0,0,0', '--within'],
    [
      { within: 1, about: [90, 0, 0] as const },
      'unanswerable.emptySelection',
      'none of its 60 bodies is chosen by --within 1 --about 90,0,0',
      'describe',
    ],
    [{ group: 7 }, 'unanswerable.emptySelection', '--group 7', 'describe'],
  ])('refuses %j', (options, code, message, remedy) => {
    expect(() => selectBodies(mixed(), options)).toThrow(
      expect.objectContaining({
        code,
        message: expect.stringContaining(message) as string,
        remedy: expect.stringContaining(remedy) as string,
      }),
    );
  });

  it('tells a file that does not know components or groups', () => {
    const particles = particlesOf(PLAIN);
    expect(() => selectBodies(particles, { only: 'gas' })).toThrow(
      expect.objectContaining({ code: 'input.missingColumn', name: 'InputError' }),
    );
    expect(() => selectBodies(particles, { group: 1 })).toThrow(
      expect.objectContaining({ code: 'input.missingColumn', name: 'InputError' }),
    );
  });
});

describe('readSnapshot with a selection', () => {
  /** Two bodies of gas, which have no mass in the file, then three of stars. */
  const twoKinds = async (): Promise<{ path: string; layout: string }> => ({
    path: await put(
      folder,
      'a.bin',
      Buffer.concat([0, 1, 2, 3, 4].map((i) => f64('little', ...body(i).slice(i < 2 ? 1 : 0)))),
    ),
    layout: await putLayout(folder, {
      components: [
        { name: 'gas', count: 2 },
        { name: 'stars', count: 3 },
      ],
      fields: [
        { name: 'mass', type: 'float64', components: ['stars'] },
        { name: 'position', type: 'float64', width: 3 },
        { name: 'velocity', type: 'float64', width: 3 },
      ],
    }),
  });

  it('needs of the others neither mass nor sense', async () => {
    const { path, layout } = await twoKinds();
    await expect(readSnapshot(path, { layout })).rejects.toMatchObject({
      code: 'input.missingColumn',
    });
    const stars = await readSnapshot(path, { layout, only: 'stars' });
    expect(bodiesOf(stars)).toEqual([2, 3, 4].map(body));
    await expect(readSnapshot(path, { layout, only: 'star' })).rejects.toMatchObject({
      code: 'input.unknownComponent',
      remedy: 'Did you mean "stars"?',
    });
  });

  it('names a bad body by its place in the file', async () => {
    const bad = mixed();
    bad.vx[33] = NaN;
    const path = join(folder, 'a.arrow');
    await writeArrow(path, bad);
    await expect(readSnapshot(path, { only: 'stars' })).rejects.toMatchObject({
      code: 'input.notFinite',
      message: expect.stringContaining('body 33') as string,
    });
    expect((await readSnapshot(path, { only: 'dark' })).count).toBe(40);
  });

  it('is measured as if the others were not there, and the record says what was chosen', async () => {
    const path = join(folder, 'a.arrow');
    await writeArrow(path, mixed());
    const chosen = await readSnapshot(path, { only: 'dark' });
    const { selection, remarks, whole, virialRadius } = await measure(chosen);
    const alone = await measure(particlesOf(PLAIN.filter((_, i) => i % 3 !== 0)));
    expect(whole).toEqual(alone.whole);
    expect(virialRadius).toBe(alone.virialRadius);
    expect(alone.selection).toBeUndefined();
    expect(selection).toMatchObject({ only: 'dark', of: 60 });
    expect(remarks.map(({ code }) => code)).toContain('selection');
    await expect(measure(chosen, { forces: 'file' })).rejects.toMatchObject({
      code: 'input.missingForces',
      message: expect.stringContaining('selected') as string,
    });
  });
});
