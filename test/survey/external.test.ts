/** `--external`: the file of fields, and what they change in a record. */
import { mkdtemp, writeFile } from 'node:fs/promises';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { beforeAll, describe, expect, it } from 'vitest';
import { measureParticles } from '../../src/dynamics/measure.ts';
import { recordSchema } from '../../src/dynamics/schema.ts';
import type { ExternalField } from '../../src/models/external.ts';
import { makeModel } from '../../src/models/make.ts';
import { crewOfOne } from '../../src/parallel/crew.ts';
import type { Particles } from '../../src/snapshot/particles.ts';
import { readExternal } from '../../src/survey/externalFile.ts';
import { prepareSnapshots } from '../../src/survey/prepare.ts';

let folder: string;
beforeAll(async () => {
  folder = await mkdtemp(join(tmpdir(), 'external-'));
});

const crew = crewOfOne();
const sphere = (shift: number): Particles => {
  const made = makeModel({ model: 'plummer', count: 2000, seed: 3 });
  return { ...made, x: Float64Array.from(made.x, (x) => x + shift) };
};
const externalOf = async (bodies: Particles, external: readonly ExternalField[]) => {
  const record = await measureParticles(bodies, { external }, crew);
  if (!record.external) throw new Error('no figures');
  return { record, figures: record.external };
};

describe('the share of fields', () => {
  it('that go as r²: W is −2 U, by Euler’s theorem, about the centre of mass', async () => {
    // Σ m x·a = −n Σ m φ for φ ~ rⁿ; here φ = ½ (3x² + 2y² + z²), each body's in full.
    const bodies = sphere(0);
    const record = await measureParticles(bodies, {}, crew);
    const [x, y, z] = record.frame.centreOfMass;
    const tensor = [-3, -2, -1, 0, 0, 0];
    const { figures } = await externalOf(bodies, [{ form: 'tide', tensor, centre: [x, y, z] }]);
    expect(figures.clausius / (-2 * figures.potential)).toBeCloseTo(1, 12);
    expect(figures.potential).toBeGreaterThan(0);
    expect(figures.energy).toBeCloseTo(record.whole.energy + figures.potential, 12);
    expect(figures.jacobiRadius).not.toBeNull();
  });

  it('of a sphere of the same form and mass doubles W, and adds U twice', async () => {
    // The bodies in the potential of their own model: Σ m φ = 2U, Σ m x·a = W, of the continuum.
    const field = { form: 'plummer', mass: 1, scaleRadius: 1 } as const;
    const { record, figures } = await externalOf(sphere(0), [field]);
    // Plummer: U = −3π/32. Samples of 2000 scatter by about 1/√N.
    const U = (-3 * Math.PI) / 32;
    expect(figures.potential / (2 * U)).toBeGreaterThan(0.95);
    expect(figures.potential / (2 * U)).toBeLessThan(1.05);
    expect(figures.clausius / U).toBeGreaterThan(0.93);
    expect(figures.clausius / U).toBeLessThan(1.07);
    const { kinetic, clausius } = record.whole;
    expect(figures.clausiusRatio).toBeCloseTo((2 * kinetic) / -(clausius + figures.clausius), 12);
    expect(record.remarks.map(({ code }) => code)).toContain('externalField');
    expect((await recordSchema()).safeParse(record).error?.message).toBeUndefined();
  });

  it('of a far point mass: King’s Jacobi radius, and the mass beyond it', async () => {
    // King 1962, AJ 67, 471: r_J = (m/3M)^⅓ R on a circular orbit about a point mass.
    const bodies = sphere(40);
    const { record, figures } = await externalOf(bodies, [{ form: 'pointMass', mass: 5000 }]);
    const R = Math.hypot(...record.frame.centreOfMass);
    const expected = Math.cbrt(record.bound.mass / (3 * 5000)) * R;
    expect((figures.jacobiRadius ?? 0) / expected).toBeCloseTo(1, 6);
    const [cx, cy, cz] = record.frame.centre;
    let beyond = 0;
    for (let i = 0; i < bodies.count; i++) {
      const r = Math.hypot(bodies.x[i] - cx, bodies.y[i] - cy, bodies.z[i] - cz);
      if (r > (figures.jacobiRadius ?? 0)) beyond += bodies.mass[i];
    }
    expect(figures.massBeyond).toBeCloseTo(beyond, 12);
    expect(beyond).toBeGreaterThan(0.1);
  });

  it('is not there without fields', async () => {
    expect('external' in (await measureParticles(sphere(0), {}, crew))).toBe(false);
  });
});

describe('the file of fields', () => {
  const put = async (text: string): Promise<string> => {
    const path = join(folder, 'fields.json');
    await writeFile(path, text);
    return path;
  };

  it('is read, by the options and by a run file beside it', async () => {
    const fields = [
      { form: 'nfw', mass: 1e12, within: 200, scaleRadius: 20, centre: [1, 2, 3] },
      { form: 'logarithmic', speed: 220, coreRadius: 0 },
      { form: 'tide', tensor: [2, -1, -1, 0, 0, 0] },
    ];
    const path = await put(JSON.stringify({ fields }));
    expect(await readExternal(path)).toEqual(fields);
    await writeFile(join(folder, 'settlemark.json'), '{"external": "fields.json"}');
    const [prepared] = await prepareSnapshots([join(folder, 'a.bin')]);
    expect(prepared.options.external).toEqual(fields);
  });

  const one = (field: string) => `{"fields": [\n  ${field}\n]}`;
  it.each([
    ['{"fields": [', /line 1, column 13: expected JSON, found the end/, /Correct/],
    ['{"field": []}', /line 1, column 2: found the unknown key "field"/, /Did you mean "fields"/],
    ['{"fields": []}', /expected a list of fields/, /./s],
    [one('3'), /line 2, column 3: found 3; expected an object/, /./],
    [one('{"form": "plumer"}'), /line 2, .*found "plumer"/, /Did you mean "plummer"/],
    [one('{"mass": 1}'), /form: found nothing; expected pointMass, plummer/, /./],
    [
      one('{"form": "plummer", "mass": 1, "scaleradius": 2}'),
      /line 2, column 34: found the unknown key "scaleradius"/,
      /Did you mean "scaleRadius"/,
    ],
    [
      one('{"form": "pointMass", "mass": -1}'),
      /mass of pointMass: found -1; expected .*above 0/,
      /./,
    ],
    [one('{"form": "plummer", "mass": 1, "scaleRadius": 0}'), /scaleRadius.*found 0/, /./],
    [one('{"form": "plummer", "mass": 1}'), /scaleRadius of plummer: found nothing/, /Add/],
    [one('{"form": "tide", "tensor": [1, 2]}'), /expected a list of 6 numbers/, /./],
    [one('{"form": "pointMass", "mass": 1, "centre": [1, null, 2]}'), /list of 3 numbers/, /./],
    [one('{"form": "pointMass", "mass": 1, "mass": 2}'), /mass.*stands there twice/, /Remove/],
  ])('%s is refused', async (text, message, remedy) => {
    await expect(readExternal(await put(text))).rejects.toMatchObject({
      code: 'usage.external',
      message: expect.stringMatching(message) as string,
      remedy: expect.stringMatching(remedy) as string,
    });
  });

  it('that is not there is told', async () => {
    const fails = readExternal(join(folder, 'none.json'));
    await expect(fails).rejects.toMatchObject({ code: 'input.notFound' });
  });
});
