import { expect, it } from 'vitest';
import { descriptionTable } from '../../src/cli/describe.ts';
import type { SnapshotDescription } from '../../src/index.ts';

const PLAIN: SnapshotDescription = {
  file: 'runs/fen_0012.bin',
  format: 'raw',
  bytes: 3_000_000,
  count: 60_000,
  time: 1.5,
  units: 'natural',
  gravity: null,
  softening: null,
  frame: { kind: 'physical' },
  byteOrder: 'little',
  structure: 'little-endian, columns: position float32×3, velocity float32×3',
  columns: [],
  components: [],
  remarks: [],
};

it('tells components in one line, as far as they are known', () => {
  expect(descriptionTable(PLAIN)).not.toContain('components');
  const components = [
    { name: 'gas', count: 12_000, mass: null },
    { name: 'dark', count: 48_000, mass: 2.5e-5 },
    { name: 'halo', count: null, mass: null },
  ];
  expect(descriptionTable({ ...PLAIN, components })).toContain(
    '\n  components: 12,000 gas, 48,000 dark (mass 2.5e-5 each), halo\n',
  );
});

it('tells what makes comoving coordinates physical', () => {
  expect(descriptionTable(PLAIN)).not.toContain('comoving');
  const frame = {
    kind: 'comoving',
    scaleFactor: 0.25,
    hubbleRate: 0.4,
    velocity: 'sqrt(a) dx/dt',
    boxSize: 50,
  } as const;
  expect(descriptionTable({ ...PLAIN, frame }).replace(/\s+/g, ' ')).toContain(
    'comoving: a = 0.25 (z = 3), H = 0.4, periodic box of edge 50; velocities are sqrt(a) dx/dt',
  );
});
