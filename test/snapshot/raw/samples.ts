/** Files for tests, put together by hand with Node's Buffer: nothing of the writer under test. */
import { mkdtemp, writeFile } from 'node:fs/promises';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import type { LayoutInput } from '../../../src/snapshot/raw/layout.ts';

export async function newFolder(): Promise<string> {
  return mkdtemp(join(tmpdir(), 'raw-'));
}

export async function put(folder: string, name: string, bytes: Uint8Array): Promise<string> {
  const path = join(folder, name);
  await writeFile(path, bytes);
  return path;
}

export async function putLayout(
  folder: string,
  layout: Omit<LayoutInput, 'settlemark'>,
  name = 'test.layout.json',
): Promise<string> {
  const path = join(folder, name);
  await writeFile(path, JSON.stringify({ settlemark: 'layout/1', ...layout }));
  return path;
}

export type Order = 'little' | 'big';

export function f64(order: Order, ...values: number[]): Buffer {
  const bytes = Buffer.alloc(values.length * 8);
  values.forEach((value, i) =>
    order === 'little' ? bytes.writeDoubleLE(value, i * 8) : bytes.writeDoubleBE(value, i * 8),
  );
  return bytes;
}

export function f32(order: Order, ...values: number[]): Buffer {
  const bytes = Buffer.alloc(values.length * 4);
  values.forEach((value, i) =>
    order === 'little' ? bytes.writeFloatLE(value, i * 4) : bytes.writeFloatBE(value, i * 4),
  );
  return bytes;
}

export function i32(order: Order, ...values: number[]): Buffer {
  const bytes = Buffer.alloc(values.length * 4);
  values.forEach((value, i) =>
    order === 'little' ? bytes.writeInt32LE(value, i * 4) : bytes.writeInt32BE(value, i * 4),
  );
  return bytes;
}

export function u64(order: Order, ...values: bigint[]): Buffer {
  const bytes = Buffer.alloc(values.length * 8);
  values.forEach((value, i) =>
    order === 'little'
      ? bytes.writeBigUInt64LE(value, i * 8)
      : bytes.writeBigUInt64BE(value, i * 8),
  );
  return bytes;
}

/** A Fortran record: data between two 4-byte length words. */
export function record(order: Order, ...parts: Buffer[]): Buffer {
  const data = Buffer.concat(parts);
  return Buffer.concat([i32(order, data.length), data, i32(order, data.length)]);
}

/** Body i of the invented swarm "Larkhill": m x y z vx vy vz, all of them short binary fractions. */
export function body(i: number): number[] {
  return [0.25 + i / 8, i + 0.5, -i - 0.25, 2 * i + 1, i / 16 + 0.125, -i / 4 - 1, 0.5 - i];
}

export const SEVEN = ['mass', 'x', 'y', 'z', 'vx', 'vy', 'vz'] as const;

export function sevenFields(type: 'float64' | 'float32'): LayoutInput['fields'] {
  return SEVEN.map((name) => ({ name, type }));
}

export const VECTORS: LayoutInput['fields'] = [
  { name: 'mass', type: 'float64' },
  { name: 'position', type: 'float64', width: 3 },
  { name: 'velocity', type: 'float64', width: 3 },
];

/** `count` bodies one after the other. */
export function bodies(order: Order, count: number, write = f64): Buffer {
  return Buffer.concat(Array.from({ length: count }, (_, i) => write(order, ...body(i))));
}
