import { readFileSync } from 'node:fs';
import { Ajv2020 } from 'ajv/dist/2020.js';
import { describe, expect, it } from 'vitest';
import { measureParticles } from '../../src/dynamics/measure.ts';
import type { MeasureRecord } from '../../src/dynamics/record.ts';
import { QUANTITIES } from '../../src/dynamics/registry.ts';
import { dimensionText, quantityTable } from '../../src/dynamics/registryText.ts';
import { recordJsonSchema, recordSchema } from '../../src/dynamics/schema.ts';
import type { MeasureOptions } from '../../src/dynamics/settings.ts';
import { rulesJsonSchema } from '../../src/gate/rulesSchema.ts';
import { makeModel } from '../../src/models/make.ts';
import { crewOfOne } from '../../src/parallel/crew.ts';
import { layoutJsonSchema } from '../../src/snapshot/raw/layout.ts';
import { runFileJsonSchema } from '../../src/survey/runFileSchema.ts';

const docs = (name: string) => readFileSync(new URL(`../../docs/${name}`, import.meta.url), 'utf8');

async function recordOf(count: number, options: MeasureOptions = {}, change?: 'cold' | 'hot') {
  const made = makeModel({ model: 'plummer', count, seed: 3 });
  const softening = made.mass.map((_: number, i: number) => 0.1 * (1 + (i % 3)));
  const particles = { ...made, columns: { ...made.columns, softening } };
  const factor = { cold: 0, hot: 30 };
  for (const column of [particles.vx, particles.vy, particles.vz]) {
    if (change) for (let i = 0; i < count; i++) column[i] *= factor[change];
  }
  const record = await measureParticles(particles, options, crewOfOne());
  // What programs outside see is the text: there NaN and Infinity would have become null.
  return { record, text: JSON.parse(JSON.stringify(record)) as MeasureRecord };
}

describe('committed files', () => {
  // If one of these fails after a change of registry, record or layout: npm run schemas.
  it('of the schemas say what the code says', async () => {
    expect(JSON.parse(docs('record.schema.json'))).toEqual(await recordJsonSchema());
    expect(JSON.parse(docs('layout.schema.json'))).toEqual(layoutJsonSchema());
    expect(JSON.parse(docs('run.schema.json'))).toEqual(runFileJsonSchema());
    expect(JSON.parse(docs('rules.schema.json'))).toEqual(rulesJsonSchema());
  });

  it('have the table of quantities of the registry', () => {
    const table = docs('record.md')
      .split('<!-- quantities: made by npm run schemas -->')[1]
      .split('<!-- end of quantities -->')[0]
      .trim();
    expect(table).toBe(quantityTable());
    expect(table.split('\n')).toHaveLength(QUANTITIES.length + 2);
  });
});

it('writes dimensions in words', () => {
  expect(dimensionText({ mass: 1, length: 2, time: -2 })).toBe('mass length² time⁻²');
  expect(dimensionText({ mass: 0, length: 1, time: -1 })).toBe('length time⁻¹');
  expect(dimensionText({ mass: 0, length: 0, time: 0 })).toBe('');
});

describe('a record', async () => {
  const zod = await recordSchema();
  // Strict: a keyword that the draft does not know is an error, and NaN is no number.
  const ajv = new Ajv2020({ strict: true, allErrors: true }).compile(await recordJsonSchema());
  const passes = (value: unknown) => [zod.safeParse(value).success, ajv(value)];

  it.each<[string, number, MeasureOptions, ('cold' | 'hot')?]>([
    ['of a sphere', 300, {}],
    ['with softening', 300, { softening: 0.1, softeningKernel: 'spline' }],
    ['with Plummer softening', 100, { softening: 0.1 }],
    ['with lengths of each body', 100, { softening: 'column', softeningKernel: 'spline' }],
    ['of one body', 1, {}],
    ['of two bodies', 2, {}],
    ['of five bodies about the deepest', 5, { centre: 'potential' }],
    ['at rest', 100, {}, 'cold'],
    ['with nothing bound', 100, {}, 'hot'],
    ['of a sphere with all extras', 300, { with: ['all'] }],
    ['of one body with all extras', 1, { with: ['all'] }],
    ['of five bodies with all extras', 5, { with: ['all'] }],
    ['at rest with all extras', 100, { with: ['all'] }, 'cold'],
    ['with nothing bound and all extras', 100, { with: ['all'] }, 'hot'],
  ])('%s validates, as it is and as text', async (_name, count, options, change) => {
    const { record, text } = await recordOf(count, options, change);
    expect(passes(record)).toEqual([true, true]);
    expect(passes(text)).toEqual([true, true]);
  });

  it('has the keys of the schema, and no others', async () => {
    const units = { length: 'pc', mass: 'Msun', gravity: 1 };
    const external = [{ form: 'pointMass', mass: 1, centre: [9, 0, 0] }] as const;
    const options: MeasureOptions = { softening: 'column', units, with: ['all'], external };
    const { text: whole } = await recordOf(300, options);
    const selection = { only: 'gas', group: '7', within: 2, about: [0, 0, 1], of: 900 };
    const text = { ...(whole as object), selection };
    expect(passes(text)).toEqual([true, true]);
    const schema = (await recordJsonSchema()) as unknown as SchemaNode;
    expect(keysOf(text)).toEqual(schemaKeys(schema));
    // Every quantity of the registry is in the record.
    const keys = keysOf(text);
    for (const { key } of QUANTITIES) expect(keys).toContain(key);
  });

  it('fails without any one of its keys', async () => {
    const { text } = await recordOf(50);
    for (const key of keysOf(text)) {
      const cut = structuredClone(text) as unknown as Record<string, unknown>;
      const path = key.split('.');
      const last = path.pop() as string;
      const parent = path.reduce((at, part) => at[part] as Record<string, unknown>, cut);
      delete parent[last];
      expect([key, ...passes(cut)]).toEqual([key, false, false]);
    }
  });

  it('has extras whole or not at all', async () => {
    const { text } = await recordOf(50, { with: ['all'] });
    const { pairsMerged, ...without } = text;
    expect(passes(without)).toEqual([true, true]);
    const { noise, ...cut } = pairsMerged ?? {};
    expect(noise).toBeGreaterThan(0);
    expect(passes({ ...text, pairsMerged: cut })).toEqual([false, false]);
    expect(passes({ ...text, hardPairs: 1.5 })).toEqual([false, false]);
  });

  it('fails with a number that is not finite, or null where a figure must be', async () => {
    const { text } = await recordOf(50);
    for (const value of [NaN, Infinity, null, '1']) {
      const whole = { ...text.whole, kinetic: value };
      expect([value, ...passes({ ...text, whole })]).toEqual([value, false, false]);
    }
    const [x, y, z] = text.frame.centre;
    for (const centre of [
      [x, y],
      [x, y, z, 0],
      [x, y, NaN],
    ]) {
      const frame = { ...text.frame, centre };
      expect(passes({ ...text, frame })).toEqual([false, false]);
    }
    expect(passes({ ...text, record: 2 })).toEqual([false, false]);
  });

  it('passes with a key that a later version adds', async () => {
    const { text } = await recordOf(50);
    expect(passes({ ...text, later: 1 })).toEqual([true, true]);
  });
});

/** Keys of all figures and settings, dotted; arrays count as one. */
function keysOf(value: unknown, before = ''): string[] {
  if (typeof value !== 'object' || value === null || Array.isArray(value)) return [before];
  return Object.entries(value)
    .flatMap(([key, inner]) => keysOf(inner, before === '' ? key : `${before}.${key}`))
    .sort();
}

interface SchemaNode {
  readonly properties?: Readonly<Record<string, SchemaNode>>;
}

function schemaKeys({ properties }: SchemaNode, before = ''): string[] {
  if (!properties) return [before];
  return Object.entries(properties)
    .flatMap(([key, inner]) => schemaKeys(inner, before === '' ? key : `${before}.${key}`))
    .sort();
}
