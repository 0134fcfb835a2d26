/** The bodies in fixtures/arrow (closed forms, see its make.js), and helpers of the tests here. */
import { mkdtemp, readdir, rm } from 'node:fs/promises';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, expect } from 'vitest';
import { InputError } from '../../../src/errors.ts';
import type { Particles } from '../../../src/snapshot/particles.ts';

export const FIXTURES = join(import.meta.dirname, '../../../fixtures/arrow');
export const COUNT = 37;

const column = (form: (i: number) => number) => Array.from({ length: COUNT }, (_, i) => form(i));
export const EXPECTED = {
  mass: column((i) => (i + 1) / 64),
  x: column((i) => i / 8),
  y: column((i) => -i / 4),
  z: column((i) => (i * i) / 16),
  vx: column((i) => 1 - i / 32),
  vy: column((i) => i / 128),
  vz: column(() => -0.5),
};
export const EXPECTED_ID = Array.from({ length: COUNT }, (_, i) => 2n ** 53n + 1n + BigInt(i));
export const EXPECTED_COMPONENT = column((i) => i % 3).map((r) => (r === 0 ? 'disk' : 'halo'));

export async function fixtureNames(): Promise<string[]> {
  return (await readdir(FIXTURES)).filter((name) => /\.arrows?$/.test(name)).sort();
}

/** A folder for the files of one test file, removed at its end. */
export async function temporaryFolder(): Promise<string> {
  const folder = await mkdtemp(join(tmpdir(), 'settlemark-arrow-'));
  afterAll(() => rm(folder, { recursive: true, force: true }));
  return folder;
}

/** Numbers of mass, position and velocity, exactly. */
export function numbersOf(particles: Particles): Record<keyof typeof EXPECTED, number[]> {
  const { mass, x, y, z, vx, vy, vz } = particles;
  const list = (values: ArrayLike<number>) => Array.from(values);
  return {
    mass: list(mass),
    x: list(x),
    y: list(y),
    z: list(z),
    vx: list(vx),
    vy: list(vy),
    vz: list(vz),
  };
}

/** The identifiers, as they are: numbers or bigints. */
export function idsOf(particles: Particles): (number | bigint)[] {
  const ids: Iterable<number | bigint> = particles.columns.id ?? [];
  return [...ids];
}

export function componentsOf(particles: Particles): string[] {
  return Array.from(particles.columns.component ?? [], (index) => particles.componentNames[index]);
}

/** Expects an InputError of this code whose message and remedy match. */
export async function expectInputError(
  promise: Promise<unknown>,
  code: string,
  message: RegExp,
  remedy = /\w/,
): Promise<void> {
  const error = await promise.then(
    () => expect.fail(`nothing was thrown; expected ${code}`),
    (reason: unknown) => reason,
  );
  expect(error).toBeInstanceOf(InputError);
  expect(error).toMatchObject({ code });
  expect((error as InputError).message).toMatch(message);
  expect((error as InputError).remedy).toMatch(remedy);
}

/** mulberry32, for choices of places and bytes alone: nothing here depends on its quality. */
export function seededChoice(seed: number): (below: number) => number {
  let state = seed >>> 0;
  return (below) => {
    state = (state + 0x6d2b79f5) >>> 0;
    let t = Math.imul(state ^ (state >>> 15), 1 | state);
    t = (t + Math.imul(t ^ (t >>> 7), 61 | t)) ^ t;
    return ((t ^ (t >>> 14)) >>> 0) % below;
  };
}

/** The bytes in pieces of `size`, as a pipe might hand them on. */
export async function* inPieces(bytes: Uint8Array, size: number): AsyncGenerator<Uint8Array> {
  for (let at = 0; at < bytes.length; at += size) {
    await Promise.resolve();
    yield bytes.subarray(at, at + size);
  }
}
