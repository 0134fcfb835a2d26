/**
 * Damaged files: every change must end, with the right number of bodies or with an InputError.
 * A decode that never returned would hold up the whole run, so that the test can fail on a hang.
 */
import { readFile, truncate, writeFile } from 'node:fs/promises';
import { join } from 'node:path';
import { describe, expect, it } from 'vitest';
import { InputError } from '../../../src/errors.ts';
import { describeArrow, readArrow, readArrowStream } from '../../../src/snapshot/arrow/read.ts';
import { writeArrow } from '../../../src/snapshot/arrow/write.ts';
import type { ReadOptions } from '../../../src/snapshot/reading.ts';
import { COUNT, expectInputError, FIXTURES, inPieces, seededChoice } from './sample.ts';
import { fixtureNames, temporaryFolder } from './sample.ts';

const folder = await temporaryFolder();
const names = await fixtureNames();
const OPTIONS: ReadOptions = { optional: ['component'] };

/** 'read', or the code of the InputError; anything else that is thrown fails the test. */
async function outcome(work: Promise<{ readonly count: number }>, what: string): Promise<string> {
  try {
    const { count } = await work;
    expect(count, what).toBe(COUNT);
    return 'read';
  } catch (error) {
    if (!(error instanceof InputError)) throw new Error(what, { cause: error });
    return error.code;
  }
}

async function outcomeOfBytes(bytes: Uint8Array, name: string, what: string): Promise<string> {
  const path = join(folder, name);
  await writeFile(path, bytes);
  return outcome(readArrow(path, OPTIONS), what);
}

describe.each(names)('%s', (name) => {
  it('cut anywhere is an error that says so', async () => {
    const bytes = await readFile(join(FIXTURES, name));
    const isStream = name.endsWith('.arrows');
    const path = join(folder, `cut-${name}`);
    await writeFile(path, bytes);
    // At every byte in one file and one stream, at every seventh in the others.
    const step = name.startsWith('flechette-vectors') ? 1 : 7;
    for (let length = bytes.length - 1; length >= 0; length -= step) {
      let work = () => readArrow(path, OPTIONS);
      if (isStream && length % 16 !== 0) {
        // From memory, for speed; the same framing reads a stream from a file.
        const part = bytes.subarray(0, length);
        work = () => readArrowStream(inPieces(part, 1 << 16), '-', OPTIONS);
      } else await truncate(path, length);
      let expected = 'input.arrowCut';
      if (length < (isStream ? 4 : 6)) expected = 'input.notArrow';
      if (length === 0) expected = 'input.empty';
      expect(await outcome(work(), `cut at ${length}`), `cut at ${length}`).toBe(expected);
    }
  });

  it('with up to three changed bytes, or a wiped range, ends well', async () => {
    const bytes = await readFile(join(FIXTURES, name));
    const choose = seededChoice(bytes.length);
    const codes = new Map<string, number>();
    for (let trial = 0; trial < 250; trial++) {
      const changed = Uint8Array.from(bytes);
      if (trial % 3 < 2) {
        for (let k = choose(3); k >= 0; k--) {
          const likely = [0, 1, 127, 128, 255];
          const value = choose(3) === 0 ? likely[choose(likely.length)] : choose(256);
          changed[choose(bytes.length)] = value;
        }
      } else {
        const begin = choose(bytes.length);
        changed.fill(choose(2) === 0 ? 0 : 255, begin, begin + 1 + choose(64));
      }
      const what = `${name}, trial ${trial}`;
      const code = await outcomeOfBytes(changed, `changed-${name}`, what);
      codes.set(code, (codes.get(code) ?? 0) + 1);
      if (trial % 10 === 0)
        await outcome(describeArrow(join(folder, `changed-${name}`)), `described: ${what}`);
      if (trial % 10 === 1 && name.endsWith('.arrows'))
        await outcome(readArrowStream(inPieces(changed, 1000), '-', OPTIONS), `piped: ${what}`);
    }
    // Both must occur, else the changes did not reach what they are for.
    expect(codes.get('input.arrowDamaged')).toBeGreaterThan(0);
    expect(codes.get('read')).toBeGreaterThan(0);
  });
});

describe('single faults are told by what they are', () => {
  const read = (bytes: Uint8Array, name: string) => {
    const path = join(folder, name);
    return writeFile(path, bytes).then(() => readArrow(path));
  };

  it('all zeros, with the right name', async () => {
    await expectInputError(read(new Uint8Array(4096), 'z.arrow'), 'input.notArrow', /00 00 00/);
    await expectInputError(read(new Uint8Array(4096), 'z.arrows'), 'input.notArrow', /00 00 00/);
  });

  it('a file cut inside its footer', async () => {
    const bytes = await readFile(join(FIXTURES, 'polars-lz4.arrow'));
    await expectInputError(
      read(bytes.subarray(0, -20), 'cut.arrow'),
      'input.arrowCut',
      /cut\.arrow is cut off.*expected its last bytes "ARROW1"/,
      /finished/,
    );
  });

  it('a stream without its end marker, cut between batches', async () => {
    const bytes = await readFile(join(FIXTURES, 'flechette-vectors.arrows'));
    await expectInputError(
      read(bytes.subarray(0, -8), 'cut.arrows'),
      'input.arrowCut',
      /ends at byte 3824 after 5 messages; expected an end marker/,
      /finished/,
    );
  });

  it('bytes after the end marker', async () => {
    const bytes = await readFile(join(FIXTURES, 'polars-zstd.arrows'));
    await expectInputError(
      read(Buffer.concat([bytes, bytes]), 'twice.arrows'),
      'input.arrowDamaged',
      new RegExp(`byte ${bytes.length} .*follow the end marker`),
    );
  });

  it('a footer that has lost a batch', async () => {
    // Three batches of 16, 16, 5 rows; the number of blocks in the footer is the int32 3 before them.
    const bytes = await readFile(join(FIXTURES, 'flechette-vectors.arrow'));
    const footerBegin = bytes.length - 10 - bytes.readInt32LE(bytes.length - 10);
    let lost = 0;
    for (let at = footerBegin; at + 4 < bytes.length - 10; at += 4) {
      if (bytes.readInt32LE(at) !== 3) continue;
      const changed = Buffer.from(bytes);
      changed.writeInt32LE(2, at);
      const error: unknown = await read(changed, 'lost.arrow').catch((reason: unknown) => reason);
      if (/belong to no batch of the footer/.test(String(error))) lost++;
    }
    expect(lost).toBe(1);
  });

  it('a changed byte in LZ4 with block or content checksums', async () => {
    for (const name of ['polars-lz4.arrow', 'flechette-lz4.arrow']) {
      const bytes = await readFile(join(FIXTURES, name));
      // Inside the data of the first block of the first frame (LZ4 frame magic 04 22 4d 18).
      const magic = Uint8Array.of(0x04, 0x22, 0x4d, 0x18);
      let at = bytes.indexOf(magic);
      let told = 0;
      for (; at > 0; at = bytes.indexOf(magic, at + 1)) {
        const changed = Buffer.from(bytes);
        changed[at + 20] ^= 1;
        const error: unknown = await read(changed, 'lz4.arrow').catch((reason: unknown) => reason);
        if (error instanceof InputError && error.code === 'input.arrowDamaged') told++;
      }
      expect(told, name).toBeGreaterThan(0);
    }
  });

  it('an unknown codec', async () => {
    // The table BodyCompression with codec 1 (Zstandard) stands in the metadata of the batch: some
    // one byte of it, raised to 2, must be refused by name.
    const bytes = await readFile(join(FIXTURES, 'polars-zstd.arrows'));
    const messages = new Set<string>();
    for (let at = 0; at < bytes.length; at++) {
      if (bytes[at] !== 1) continue;
      const changed = Uint8Array.from(bytes);
      changed[at] = 2;
      await readArrowStream(inPieces(changed, 1 << 16), '-').catch((error: unknown) => {
        const { code, message } = error as InputError;
        if (code === 'input.codec') messages.add(message);
      });
    }
    expect([...messages]).toEqual([
      '-: compressed with codec 2, method 0; expected LZ4 frames or Zstandard, buffer by buffer',
    ]);
  });
});

describe('a file of our own', () => {
  it('cut anywhere is an error that says so', async () => {
    const particles = await readArrow(join(FIXTURES, 'polars-lz4.arrow'), OPTIONS);
    const path = join(folder, 'own.arrow');
    await writeArrow(path, particles, { rowsPerBatch: 20 });
    const { length } = await readFile(path);
    for (let at = length - 1; at >= 6; at -= 11) {
      await truncate(path, at);
      expect(await outcome(readArrow(path), `cut at ${at}`)).toBe('input.arrowCut');
    }
  });
});
