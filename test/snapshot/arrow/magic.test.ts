import { describe, expect, it } from 'vitest';
import { readFile } from 'node:fs/promises';
import { join } from 'node:path';
import { looksLikeArrow } from '../../../src/snapshot/arrow/magic.ts';
import { FIXTURES, fixtureNames } from './sample.ts';

describe('looksLikeArrow', () => {
  // Source: what two writers that are not ours put first (fixtures/arrow/make.js).
  it('knows files and streams by their bytes, whatever their name', async () => {
    for (const name of await fixtureNames()) {
      const head = (await readFile(join(FIXTURES, name))).subarray(0, 16);
      const expected = name.endsWith('.arrows') ? 'arrow-stream' : 'arrow-file';
      expect(looksLikeArrow(head, 'snapshot.dat'), name).toBe(expected);
    }
  });

  it('takes raw numbers for nothing', () => {
    const mass = new Uint8Array(Float64Array.of(1e-3, 0.5).buffer);
    expect(looksLikeArrow(mass, 'snapshot_001')).toBeNull();
    // A float32 NaN with all bits set, then the float32 1: the marker, but no possible length.
    const nan = Uint8Array.of(255, 255, 255, 255, 0, 0, 128, 63);
    expect(looksLikeArrow(nan, 'snapshot.bin')).toBeNull();
    expect(looksLikeArrow(new Uint8Array(16), 'snapshot.bin')).toBeNull();
    expect(looksLikeArrow(new Uint8Array(0), 'snapshot.bin')).toBeNull();
  });

  it('goes by the ending where the bytes say nothing', () => {
    const none = new Uint8Array(8);
    expect(looksLikeArrow(none, 'run/a.arrow')).toBe('arrow-file');
    expect(looksLikeArrow(none, 'run/A.FEATHER')).toBe('arrow-file');
    expect(looksLikeArrow(none, 'run/a.arrows')).toBe('arrow-stream');
    expect(looksLikeArrow(none, 'run/a.ipc')).toBe('arrow-stream');
    expect(looksLikeArrow(none, 'arrow')).toBeNull();
  });
});
