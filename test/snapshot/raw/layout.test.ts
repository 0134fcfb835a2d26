import { Ajv2020 } from 'ajv/dist/2020.js';
import { describe, expect, it } from 'vitest';
import {
  bodyBytes,
  DEFAULT_LAYOUT,
  describeLayout,
  layoutJsonSchema,
} from '../../../src/snapshot/raw/layout.ts';
import { checkLayout, parseLayout } from '../../../src/snapshot/raw/layout-check.ts';
import { VECTORS } from './samples.ts';

const FULL = {
  $schema: 'layout.schema.json',
  settlemark: 'layout/1',
  byteOrder: 'little',
  markers: 'none',
  headerBytes: 16,
  header: [
    { name: 'time', type: 'float64', offset: 0 },
    { name: 'count', type: 'uint64', offset: 8 },
  ],
  arrangement: 'interleaved',
  fields: [
    { name: 'mass', type: 'float64' },
    { name: 'position', type: 'float64', width: 3 },
    { name: 'velocity', type: 'float64', width: 3, scale: 1 },
    { skip: 4 },
  ],
  constants: { gravity: 1 },
  units: 'natural',
};
const LEAST = { settlemark: 'layout/1', fields: VECTORS };

it('fills in what may be left out', () => {
  expect(parseLayout(`\uFEFF${JSON.stringify(LEAST)}`, 'l.json')).toMatchObject({
    byteOrder: 'little',
    markers: 'none',
    headerBytes: 0,
    header: [],
    arrangement: 'interleaved',
    fields: [{ name: 'mass', width: 1, scale: 1 }, { width: 3 }, { width: 3 }],
  });
  expect(bodyBytes(checkLayout(FULL, 'l.json'))).toBe(60);
  expect(bodyBytes(DEFAULT_LAYOUT)).toBe(56);
});

it('tells a layout in one line', () => {
  expect(describeLayout(checkLayout({ ...FULL, markers: 'fortran4' }, 'l.json'))).toBe(
    'little-endian, interleaved, fortran4 markers, header of 16 bytes: mass float64, position float64×3, velocity float64×3, (4 bytes)',
  );
});

const cases: [string, unknown, string[]][] = [
  [
    'a misspelt key',
    { ...FULL, byteOrdr: 'big' },
    ['the layout', '"byteOrdr"', 'mean "byteOrder"'],
  ],
  [
    'a misspelt key of a field, rather than the one missing for it',
    { ...FULL, fields: [{ name: 'mass', typ: 'float64' }] },
    ['fields[0]', '"typ"', 'mean "type"'],
  ],
  ['a key of constants', { ...FULL, constants: { mas: 1 } }, ['constants', '"mas"', 'mean "mass"']],
  ['a key that is near nothing', { ...FULL, colour: 1 }, ['"colour"', 'Remove it']],
  [
    'an unknown type',
    { ...FULL, header: [{ name: 'time', type: 'flot64', offset: 0 }] },
    ['header[0].type', 'found "flot64"', '"float32" or "float64"', 'mean "float64"'],
  ],
  [
    'another version',
    { ...FULL, settlemark: 'layout/2' },
    ['settlemark', '"layout/2"', '"layout/1"'],
  ],
  ['a missing version', { fields: VECTORS }, ['settlemark', 'found nothing', '"layout/1"']],
  ['no fields', { ...FULL, fields: [] }, ['fields', 'found []', 'at least one item']],
  ['a negative skip', { ...FULL, fields: [{ skip: -4 }] }, ['fields[0].skip', '-4', 'at least 1']],
  ['a field that is a number', { ...FULL, fields: [5] }, ['fields[0]', 'found 5', 'an object']],
  ['half a byte', { ...FULL, headerBytes: 15.5 }, ['headerBytes', '15.5', 'a whole number']],
  ['a text for a number', { ...FULL, headerBytes: '16' }, ['headerBytes', '"16"', 'a number']],
  [
    'an empty name',
    { ...FULL, fields: [{ name: '', type: 'int8' }] },
    ['fields[0].name', 'a name'],
  ],
  [
    'G = 0',
    { ...FULL, constants: { gravity: 0 } },
    ['constants.gravity', 'found 0', 'more than 0'],
  ],
  ['a list', [], ['the layout', 'found []', 'an object']],
  ['other units', { ...FULL, units: 'kpc-kms' }, ['units', '"kpc-kms"', 'mean "kpc-kms-msun"']],
  [
    'an item beyond the header',
    { ...FULL, headerBytes: 12 },
    ['header[1]', '"count" ends at byte 16', 'headerBytes is 12', 'at least 16'],
  ],
  [
    'a header name twice',
    { ...FULL, header: [FULL.header[0], { ...FULL.header[0], offset: 8 }] },
    ['header[1].name', '"time" stands there twice'],
  ],
  [
    'a constant that the header holds',
    { ...FULL, constants: { time: 1 } },
    ['constants.time', 'the header holds time'],
  ],
  [
    'a quantity twice under two names',
    { ...LEAST, fields: [...VECTORS, { name: 'm', type: 'float64' }] },
    ['fields[3].name', '"m"', 'fields[0]'],
  ],
  [
    'a vector and its component',
    { ...LEAST, fields: [...VECTORS, { name: 'vx', type: 'float64' }] },
    ['"velocity" and "vx"'],
  ],
  [
    'a position of two numbers',
    { ...LEAST, fields: [{ name: 'position', type: 'float64', width: 2 }] },
    ['fields[0].width', 'found 2 for position; expected 3'],
  ],
  [
    'a wide mass',
    { ...LEAST, fields: [{ name: 'mass', type: 'float64', width: 2 }] },
    ['fields[0].width', 'found 2 for mass; expected 1'],
  ],
  [
    'a scale of 0',
    { ...LEAST, fields: [{ name: 'mass', type: 'float64', scale: 0 }] },
    ['fields[0].scale', 'found 0'],
  ],
  [
    'two masses',
    { ...LEAST, constants: { mass: 1 } },
    ['constants.mass', 'fields[0] holds masses'],
  ],
];

describe('a layout that is wrong', () => {
  it.each(cases)('refuses %s with file, key, found and expected', (_, value, parts) => {
    let error: unknown;
    try {
      parseLayout(JSON.stringify(value), 'runs/l.json');
    } catch (thrown) {
      error = thrown;
    }
    expect(error).toMatchObject({ name: 'InputError', code: 'input.layoutInvalid' });
    const { message, remedy } = error as { message: string; remedy: string };
    for (const part of ['runs/l.json: ', ...parts])
      expect(`${message} | ${remedy}`).toContain(part);
  });

  it.each([
    ['{\n  "settlemark": "layout/1",\n  "fields": [,]\n}', 'line 3, column 14', 'found ","'],
    ['{ "settlemark": ', 'line 1, column 17', 'the end of the text'],
    ['mass x y z', 'line 1, column 1', 'found "m"'],
  ])('tells where the JSON of %j breaks', (text, place, found) => {
    expect(() => parseLayout(text, 'l.json')).toThrow(
      expect.objectContaining({
        code: 'input.layoutNotJson',
        message: expect.stringMatching(new RegExp(`l.json, ${place}.*${found}`)) as string,
      }),
    );
  });

  it.each([
    ['run.bin', '0 times'],
    ['{part}_{part}', '2 times'],
    ['parts/run_{part}.bin', 'a folder'],
    ['run_*{part}.bin', 'where the number begins'],
    ['run1{part}.bin', 'where the number begins'],
    ['', 'parts'],
  ])('refuses the parts %j', (parts, text) => {
    expect(() => checkLayout({ ...FULL, parts }, 'l.json')).toThrow(
      expect.objectContaining({
        code: 'input.layoutInvalid',
        message: expect.stringContaining(text) as string,
      }),
    );
    expect(checkLayout({ ...FULL, parts: 'a_*_{part}.x' }, 'l.json').parts).toBe('a_*_{part}.x');
  });

  it('takes any name for a field, those of object members too', () => {
    const layout = {
      ...LEAST,
      fields: [...VECTORS, { name: 'constructor', type: 'int8', width: 5 }],
    };
    expect(checkLayout(layout, 'l.json').fields).toHaveLength(4);
  });
});

// Source: JSON Schema draft 2020-12 as ajv understands it.
describe('the JSON Schema', () => {
  const validate = new Ajv2020({ strict: true, allErrors: true }).compile(layoutJsonSchema());

  it.each([
    [FULL, true],
    [LEAST, true],
    [{ ...FULL, byteOrdr: 'big' }, false],
    [{ ...FULL, fields: [{ name: 'mass', type: 'float128' }] }, false],
    [{ ...FULL, fields: [{ name: 'mass', type: 'float64', skip: 4 }] }, false],
    [{ ...FULL, fields: [] }, false],
    [{ fields: VECTORS }, false],
    [{ ...FULL, headerBytes: 1.5 }, false],
    [{ ...FULL, constants: { mass: -1 } }, false],
  ])('agrees with our own check on example %#', (value, isValid) => {
    expect(validate(value)).toBe(isValid);
    if (isValid) checkLayout(value, 'l.json');
    else
      expect(() => checkLayout(value, 'l.json')).toThrow(
        expect.objectContaining({ code: 'input.layoutInvalid' }),
      );
  });
});
