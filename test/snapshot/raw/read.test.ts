import { appendFile, chmod, mkdir, truncate, unlink, utimes, writeFile } from 'node:fs/promises';
import { join } from 'node:path';
import { beforeEach, describe, expect, it, vi } from 'vitest';
import type { Particles } from '../../../src/snapshot/particles.ts';
import { readRaw } from '../../../src/snapshot/raw/read.ts';
import {
  bodies,
  body,
  f32,
  f64,
  i32,
  newFolder,
  put,
  putLayout,
  sevenFields,
  SEVEN,
  u64,
  VECTORS,
  type Order,
} from './samples.ts';

let folder: string;
beforeEach(async () => {
  folder = await newFolder();
});

/** Values are short binary fractions, exact in float32 too: comparisons need no tolerance. */
function expectBodies(particles: Particles, count: number): void {
  expect(particles.count).toBe(count);
  for (let i = 0; i < count; i++) {
    expect(SEVEN.map((name) => particles[name][i])).toEqual(body(i));
  }
}

describe('what the bytes mean', () => {
  it('takes 7 little-endian float64 a body without any layout', async () => {
    const path = await put(folder, 'larkhill.bin', bodies('little', 5));
    const particles = await readRaw(path, {});
    expectBodies(particles, 5);
    expect(particles.mass).toBeInstanceOf(Float64Array);
    expect(particles.mass.buffer).toBeInstanceOf(SharedArrayBuffer);
    expect(particles).toMatchObject({
      time: null,
      units: null,
      gravity: null,
      softening: null,
      frame: { kind: 'physical' },
      origin: { file: path, format: 'raw', mantissaBits: 53, remarks: [] },
    });
  });

  it.each(['little', 'big'] as const)(
    'reads header, vectors and 64-bit ids, %s-endian',
    async (order) => {
      const ids = [2n ** 64n - 1n, 2n ** 53n + 1n, 7n];
      const path = await put(
        folder,
        'a.bin',
        Buffer.concat([
          f64(order, 12.5),
          u64(order, 3n),
          f32(order, 0.75),
          i32(order, 99),
          ...ids.map((id, i) => Buffer.concat([f64(order, ...body(i)), u64(order, id)])),
        ]),
      );
      const layout = await putLayout(folder, {
        byteOrder: order,
        headerBytes: 24,
        header: [
          { name: 'time', type: 'float64', offset: 0 },
          { name: 'count', type: 'uint64', offset: 8 },
          { name: 'softening', type: 'float32', offset: 16 },
          { name: 'nDark', type: 'int32', offset: 20 },
        ],
        fields: [...VECTORS, { name: 'id', type: 'uint64' }],
        constants: { gravity: 2 },
        units: 'kpc-kms-msun',
      });
      const particles = await readRaw(path, { layout });
      expectBodies(particles, 3);
      expect([...(particles.columns.id as BigUint64Array)]).toEqual(ids);
      expect(particles).toMatchObject({ time: 12.5, softening: 0.75, gravity: 2 });
      expect(particles.units?.name).toBe('kpc-kms-msun');
      expect(particles.origin.remarks).toEqual([]);
    },
  );

  it.each(['little', 'big'] as const)('keeps float32 as float32, %s-endian', async (order) => {
    const path = await put(folder, 'a.bin', bodies(order, 4, f32));
    const layout = await putLayout(folder, { byteOrder: order, fields: sevenFields('float32') });
    const particles = await readRaw(path, { layout });
    expectBodies(particles, 4);
    expect(particles.vz).toBeInstanceOf(Float32Array);
    expect(particles.origin.mantissaBits).toBe(24);
  });

  it.each(['little', 'big'] as const)(
    'reads blocks, unaligned fields, skips, scales and a constant mass, %s-endian',
    async (order) => {
      const n = 3;
      const all = Array.from({ length: n }, (_, i) => body(i));
      const unaligned = all.map((b, i) =>
        Buffer.concat([
          Buffer.from([0xee]),
          f32(order, b[1], b[2], b[3]),
          f64(order, b[4], b[5], b[6]),
          order === 'little' ? Buffer.from([i, 0xff]) : Buffer.from([0xff, i]),
        ]),
      );
      const path = await put(folder, 'a.bin', Buffer.concat(unaligned));
      const layout = await putLayout(folder, {
        byteOrder: order,
        fields: [
          { skip: 1 },
          { name: 'position', type: 'float32', width: 3, scale: 10 },
          { name: 'velocity', type: 'float64', width: 3 },
          { name: 'id', type: 'int16' },
        ],
        constants: { mass: 0.5, time: -3 },
      });
      const particles = await readRaw(path, { layout });
      expect([...particles.mass]).toEqual([0.5, 0.5, 0.5]);
      expect([...particles.x]).toEqual(all.map((b) => 10 * b[1]));
      expect(particles.x).toBeInstanceOf(Float64Array);
      expect([...particles.vz]).toEqual(all.map((b) => b[6]));
      // 0xff00 + i as a two's complement of 16 bits.
      expect([...(particles.columns.id as Int16Array)]).toEqual([-256, -255, -254]);
      expect(particles.time).toBe(-3);
    },
  );

  it('reads one block a field, and blocks of no interest not at all', async () => {
    const n = 3;
    const column = (k: number): Buffer =>
      f64('big', ...Array.from({ length: n }, (_, i) => body(i)[k]));
    const position = f64('big', ...Array.from({ length: n }, (_, i) => body(i).slice(1, 4)).flat());
    const path = await put(
      folder,
      'a.bin',
      Buffer.concat([column(0), Buffer.alloc(5 * n), position, column(4), column(5), column(6)]),
    );
    const layout = await putLayout(folder, {
      byteOrder: 'big',
      arrangement: 'columns',
      fields: [
        { name: 'm', type: 'float64' },
        { skip: 5 },
        { name: 'position', type: 'float64', width: 3 },
        ...(['vx', 'vy', 'vz'] as const).map((name) => ({ name, type: 'float64' as const })),
      ],
    });
    let total = 0;
    const particles = await readRaw(path, { layout, onProgress: (_, all) => (total = all) });
    expectBodies(particles, n);
    expect(total).toBe(7 * 8 * n);
  });

  it('loads optional columns only when asked, and takes others by --columns', async () => {
    const rows = [3, -1, 3, 70000].map((code, i) =>
      Buffer.concat([
        f64('little', ...body(i)),
        i32('little', code),
        f32('little', 0.5 * i),
        f64('little', i, 2 * i, 3 * i),
        f64('little', 100 + i),
      ]),
    );
    const path = await put(folder, 'a.bin', Buffer.concat(rows));
    const layout = await putLayout(folder, {
      fields: [
        ...VECTORS,
        { name: 'component', type: 'int32' },
        { name: 'eps', type: 'float32' },
        { name: 'acceleration', type: 'float64', width: 3 },
        { name: 'weight', type: 'float64' },
      ],
    });
    expect((await readRaw(path, { layout })).columns).toEqual({});
    const particles = await readRaw(path, {
      layout,
      optional: ['component', 'softening', 'ax', 'density'],
      columns: { mass: 'weight', softening: 'eps' },
    });
    expect([...particles.mass]).toEqual([100, 101, 102, 103]);
    expect(particles.componentNames).toEqual(['-1', '3', '70000']);
    expect([...(particles.columns.component ?? [])]).toEqual([1, 0, 1, 2]);
    expect([...(particles.columns.softening ?? [])]).toEqual([0, 0.5, 1, 1.5]);
    expect([...(particles.columns.acceleration?.z ?? [])]).toEqual([0, 3, 6, 9]);
    expect(particles.columns.density).toBeUndefined();
  });

  it('reads integers as reals, 64-bit ones to the nearest double', async () => {
    // 2^53 + 1 lies halfway between doubles and goes to the even one, 2^53 (IEEE 754 round to even).
    const position = [2n ** 53n + 1n, 2n ** 63n - 1n, 5n];
    const path = await put(
      folder,
      'a.bin',
      Buffer.concat([i32('big', -7, 8, 9), u64('big', ...position), Buffer.from([200])]),
    );
    const layout = await putLayout(folder, {
      byteOrder: 'big',
      fields: [
        { name: 'velocity', type: 'int32', width: 3 },
        { name: 'position', type: 'int64', width: 3 },
        { name: 'mass', type: 'uint8' },
      ],
    });
    const particles = await readRaw(path, { layout });
    expect([particles.x[0], particles.y[0], particles.z[0]]).toEqual(position.map(Number));
    expect([particles.vx[0], particles.mass[0]]).toEqual([-7, 200]);
  });

  it('reads more than one chunk, in order', async () => {
    const n = 200_000; // 11.2 MB: six pieces
    const data = new Float64Array(7 * n).map((_, k) => k + 1);
    const path = await put(folder, 'a.bin', Buffer.from(data.buffer));
    const calls: number[] = [];
    const { mass, vz } = await readRaw(path, { onProgress: (done) => calls.push(done) });
    // 37,449 bodies a piece of 2 MiB
    for (const i of [0, 1, 37_448, 37_449, 187_244, 187_245, n - 1]) {
      expect([mass[i], vz[i]]).toEqual([7 * i + 1, 7 * i + 7]);
    }
    expect(calls.at(-1)).toBe(56 * n);
  });

  it('holds one copy of the data in shared memory, and little beside it', async () => {
    const n = 200_000;
    const path = await put(folder, 'a.bin', Buffer.alloc(56 * n, 1));
    let shared = 0;
    let plain = 0;
    // Constructors that count what they are asked for.
    vi.stubGlobal(
      'SharedArrayBuffer',
      class extends SharedArrayBuffer {
        constructor(bytes: number) {
          super(bytes);
          shared += bytes;
        }
      },
    );
    vi.stubGlobal(
      'ArrayBuffer',
      class extends ArrayBuffer {
        constructor(bytes: number) {
          super(bytes);
          plain += bytes;
        }
      },
    );
    try {
      await readRaw(path, {});
    } finally {
      vi.unstubAllGlobals();
    }
    expect(shared).toBe(56 * n);
    expect(plain).toBeLessThanOrEqual((2 << 20) + 64);
  });
});

describe('which layout', () => {
  const layout = { byteOrder: 'big' as Order, fields: VECTORS };

  it.each([
    ['larkhill.layout.json', 'other.layout.json'],
    ['only.layout.json', 'layout.json'],
    ['layout.json', 'readme.json'],
  ])('finds %s and says so', async (name, beside) => {
    const path = await put(folder, 'larkhill.bin', bodies('big', 3));
    await putLayout(folder, layout, name);
    await writeFile(join(folder, beside), '{}');
    const particles = await readRaw(path, {});
    expectBodies(particles, 3);
    expect(particles.origin.remarks).toEqual([
      expect.objectContaining({
        code: 'layout.found',
        text: expect.stringContaining(join(folder, name)) as string,
        remedy: expect.stringContaining('--layout') as string,
      }),
    ]);
  });

  it('takes the default and says so when several layouts could be meant', async () => {
    const path = await put(folder, 'larkhill.bin', bodies('little', 3));
    await putLayout(folder, layout, 'a.layout.json');
    await putLayout(folder, layout, 'b.layout.json');
    const particles = await readRaw(path, {});
    expectBodies(particles, 3);
    expect(particles.origin.remarks).toMatchObject([
      {
        code: 'layout.ambiguous',
        text: expect.stringContaining('(a.layout.json, b.layout.json)') as string,
      },
    ]);
  });

  it('sees a layout that comes later, or changes, in a folder that was at rest', async () => {
    const path = await put(folder, 'larkhill.bin', bodies('little', 4));
    const found = async (): Promise<string[]> =>
      (await readRaw(path, {})).origin.remarks.map(({ code }) => code);
    const long = new Date(Date.now() - 60_000);
    await utimes(folder, long, long);
    expect(await found()).toEqual([]);
    expect(await found()).toEqual([]);
    await putLayout(folder, { fields: VECTORS }, 'layout.json');
    expect(await found()).toEqual(['layout.found']);
    await utimes(folder, long, long);
    expect(await found()).toEqual(['layout.found']);
    await putLayout(folder, { fields: VECTORS, constants: { time: 3 } }, 'layout.json');
    expect((await readRaw(path, {})).time).toBe(3);
    await unlink(join(folder, 'layout.json'));
    expect(await found()).toEqual([]);
  });

  it('says that a field is nearly named like one it knows', async () => {
    const path = await put(folder, 'a.bin', f64('little', ...body(0), 9));
    const named = await putLayout(folder, {
      fields: [...VECTORS, { name: 'potental', type: 'float64' }],
    });
    const { origin } = await readRaw(path, { layout: named });
    expect(origin.remarks).toMatchObject([
      {
        code: 'layout.similarName',
        remedy: expect.stringContaining('potential=potental') as string,
      },
    ]);
  });
});

describe('what cannot be read', () => {
  const fails = async (
    path: string,
    options: Parameters<typeof readRaw>[1],
    code: string,
    ...parts: string[]
  ): Promise<void> => {
    const error: unknown = await readRaw(path, options).catch((thrown: unknown) => thrown);
    expect(error).toMatchObject({ name: 'InputError', code, remedy: expect.any(String) as string });
    const { message, remedy } = error as { message: string; remedy: string };
    for (const part of parts) expect(`${message} | ${remedy}`).toContain(part);
  };

  it('tells apart the ways in which a file cannot be opened', async () => {
    await mkdir(join(folder, 'sub'));
    await put(folder, 'empty.bin', Buffer.alloc(0));
    await fails(join(folder, 'no.bin'), {}, 'input.notFound', 'no.bin', 'does not exist');
    await fails(join(folder, 'sub'), {}, 'input.isDirectory', 'is a folder', 'expected a file');
    await fails(join(folder, 'empty.bin'), {}, 'input.empty', '0 bytes');
    await fails('/dev/null', {}, 'input.notAFile', 'device');
  });

  it.skipIf(process.getuid?.() === 0)('tells that permission is denied', async () => {
    const path = await put(folder, 'a.bin', bodies('little', 1));
    await chmod(path, 0);
    await fails(path, {}, 'input.noPermission', 'permission denied');
  });

  it('tells a missing layout and a missing or unknown column', async () => {
    const path = await put(folder, 'a.bin', bodies('little', 1));
    await fails(path, { layout: join(folder, 'l.json') }, 'input.layoutNotFound', 'l.json');
    await fails(path, { columns: { mass: 'vxx' } }, 'input.unknownColumn', '"vxx"', 'mass=vx');
    const noVelocity = await putLayout(folder, {
      fields: [...VECTORS.slice(0, 2), { name: 'velocty', type: 'float64', width: 3 }],
    });
    await fails(path, { layout: noVelocity }, 'input.missingColumn', 'velocity=velocty');
    const noMass = await putLayout(folder, { fields: [{ skip: 8 }, ...VECTORS.slice(1)] });
    await fails(path, { layout: noMass }, 'input.missingColumn', 'mass', 'constants.mass');
    await fails(
      path,
      { layout: await putLayout(folder, { fields: VECTORS }), columns: { mass: 'position' } },
      'input.columnWidth',
      'position',
      'expected 1',
    );
  });

  const counted = {
    headerBytes: 16,
    header: [
      { name: 'time', type: 'float64' as const, offset: 0 },
      { name: 'count', type: 'uint64' as const, offset: 8 },
    ],
    fields: VECTORS,
  };
  const header = (order: Order, count: bigint): Buffer =>
    Buffer.concat([f64(order, 1), u64(order, count)]);

  it('tells a file without bodies, cut off, or with a bad count', async () => {
    const layout = await putLayout(folder, counted);
    const none = await put(folder, '0.bin', header('little', 0n));
    await fails(none, { layout }, 'input.noParticles', 'no particles', '0 bodies');
    const cut = Buffer.concat([header('little', 3n), bodies('little', 3)]).subarray(0, 16 + 130);
    await fails(
      await put(folder, 'cut.bin', cut),
      { layout },
      'input.truncated',
      '146 bytes',
      'expected 184: 3 bodies of 56 bytes after a header of 16',
      'inside body 2',
    );
    const bare = await newFolder(); // where no layout lies beside the data
    await fails(
      await put(bare, 'rest.bin', bodies('little', 2).subarray(0, 100)),
      {},
      'input.partialRecord',
      '100 bytes',
      'multiple of 56',
      '44 are left over after 1 bodies',
    );
    const real = await putLayout(folder, {
      ...counted,
      header: [{ name: 'count', type: 'float64', offset: 0 }],
    });
    const half = Buffer.concat([f64('little', 2.5, 0), bodies('little', 2)]);
    await fails(await put(folder, 'half.bin', half), { layout: real }, 'input.badCount', '2.5');
    const headed = await putLayout(folder, { headerBytes: 16, fields: VECTORS }, 'h.json');
    await fails(none, { layout: headed }, 'input.noParticles', 'ends with its header');
    await fails(
      await put(folder, 'short.bin', Buffer.alloc(9)),
      { layout },
      'input.truncated',
      '9 bytes',
      'header of 16',
    );
  });

  it('says which mistake in the layout would explain the length', async () => {
    const layout = await putLayout(folder, counted);
    const n = 6;
    const cases: [string, Buffer, string][] = [
      ['order', Buffer.concat([header('big', BigInt(n)), bodies('big', n)]), 'byteOrder "big"'],
      [
        'single',
        Buffer.concat([header('little', BigInt(n)), bodies('little', n, f32)]),
        'float32 instead of float64',
      ],
      [
        'both',
        Buffer.concat([header('big', BigInt(n)), bodies('big', n, f32)]),
        'byteOrder "big" and float32 instead of float64',
      ],
      [
        'header',
        Buffer.concat([header('little', BigInt(n)), Buffer.alloc(24), bodies('little', n)]),
        'headerBytes 40',
      ],
      [
        'fortran',
        Buffer.concat([
          i32('little', 16),
          header('little', BigInt(n)),
          i32('little', 16, 56 * n),
          bodies('little', n),
          i32('little', 56 * n),
        ]),
        'markers "fortran4"',
      ],
    ];
    for (const [name, bytes, cause] of cases) {
      const path = await put(folder, `${name}.bin`, bytes);
      await fails(path, { layout }, 'input.sizeMismatch', `${bytes.length} bytes`, cause, layout);
    }
    const double = await putLayout(folder, { ...counted, fields: sevenFields('float32') });
    await fails(
      await put(folder, 'd.bin', Buffer.concat([header('little', 6n), bodies('little', n)])),
      { layout: double },
      'input.sizeMismatch',
      'float64 instead of float32',
    );
  });

  it('offers to write a layout when there was none, and sees Fortran markers', async () => {
    const single = await put(folder, 'a.bin', bodies('little', 3, f32));
    await fails(single, {}, 'input.sizeMismatch', 'default layout', 'float32', 'layout file');
    const marked = Buffer.concat([
      i32('big', 12),
      Buffer.alloc(12),
      i32('big', 12),
      Buffer.alloc(9),
    ]);
    await fails(
      await put(folder, 'f.bin', marked),
      {},
      'input.partialRecord',
      'record of 12 bytes',
      '"fortran4"',
      '"big"',
    );
  });

  it('refuses values of the header that mean nothing', async () => {
    const layout = await putLayout(folder, counted);
    const bytes = Buffer.concat([f64('little', NaN), u64('little', 1n), bodies('little', 1)]);
    await fails(await put(folder, 'a.bin', bytes), { layout }, 'input.headerValue', 'time is NaN');
  });

  it('refuses components that are no whole numbers', async () => {
    const path = await put(folder, 'a.bin', f64('little', ...body(0), 0.5));
    const layout = await putLayout(folder, {
      fields: [...VECTORS, { name: 'component', type: 'float64' }],
    });
    await fails(path, { layout, optional: ['component'] }, 'input.component', 'body 0', '0.5');
  });

  it('notices that the file changed while it was read', async () => {
    const path = await put(folder, 'a.bin', Buffer.alloc(56 * 200_000, 1));
    let pending: Promise<void> | undefined;
    const grow = (): void => void (pending ??= appendFile(path, 'more'));
    await fails(path, { onProgress: grow }, 'input.changed', '11200000 bytes before');
    await pending;
    await put(folder, 'a.bin', Buffer.alloc(56 * 200_000, 1));
    let cut: Promise<void> | undefined;
    const shrink = (): void => void (cut ??= truncate(path, 1000));
    await fails(path, { onProgress: shrink }, 'input.changed', 'while it was read');
    await cut;
  });

  it('stops when it is told to', async () => {
    const path = await put(folder, 'a.bin', Buffer.alloc(56 * 200_000, 1));
    const controller = new AbortController();
    let calls = 0;
    const onProgress = (): void => {
      calls++;
      controller.abort();
    };
    await expect(readRaw(path, { signal: controller.signal, onProgress })).rejects.toMatchObject({
      name: 'InterruptedError',
    });
    expect(calls).toBe(1);
  });
});
