/** By what a snapshot is known again: the bytes of its files, and the options that change a figure. */
import { createHash } from 'node:crypto';
import { createReadStream } from 'node:fs';
import { stat } from 'node:fs/promises';
import { relative, resolve } from 'node:path';
import { layoutFileOf } from '../snapshot/raw/find-layout.ts';
import type { PreparedSnapshot } from './prepare.ts';

/** A file as it was seen. */
export interface Source {
  /** From the folder of the ledger. */
  readonly name: string;
  readonly bytes: number;
  /** When contents or anything else about it last changed [ms since 1970]. */
  readonly changed: number;
  /** Number of the file in its file system, as text: it may exceed 2⁵³. */
  readonly inode: string;
}

/**
 * The files that a snapshot consists of: itself or its parts, then its layout.
 * @throws Error if one cannot be looked at or is no regular file
 */
export async function sourcesOf(
  { file, parts, options }: PreparedSnapshot,
  folder: string,
): Promise<readonly Source[]> {
  const layout = await layoutFileOf(file, options.read?.layout);
  return Promise.all(
    [...(parts ?? [file]), ...(layout === null ? [] : [layout])].map(async (path) => {
      const status = await stat(path, { bigint: true });
      if (!status.isFile()) throw new Error(`${path} is no regular file`);
      // Times of change cannot be set back by copying tools, as times of modification can.
      const changed = status.ctimeNs > status.mtimeNs ? status.ctimeNs : status.mtimeNs;
      return {
        name: relative(folder, resolve(path)),
        bytes: Number(status.size),
        changed: Number(changed) / 1e6,
        inode: String(status.ino),
      };
    }),
  );
}

/** Whether nothing hints that a file has changed. */
export function sameFile(a: Source, b: Source | undefined): boolean {
  return (
    b !== undefined &&
    a.name === b.name &&
    a.bytes === b.bytes &&
    a.changed === b.changed &&
    a.inode === b.inode
  );
}

/** SHA-256 of each file. */
export async function fingerprint(sources: readonly Source[], folder: string): Promise<string[]> {
  const sums: string[] = [];
  for (const { name } of sources) {
    const sum = createHash('sha256');
    const chunks = createReadStream(resolve(folder, name), { highWaterMark: 2 ** 20 });
    for await (const chunk of chunks) sum.update(chunk as Buffer);
    sums.push(sum.digest('hex'));
  }
  return sums;
}

const known = new WeakMap<object, string>();

/** The options that change a figure, as a short text: equal texts, equal options. */
export function figureOptions(options: PreparedSnapshot['options']): string {
  let text = known.get(options);
  if (text === undefined) {
    const reading: Record<string, unknown> = { ...options.read };
    // The layout counts by its bytes; the others change no figure.
    for (const key of ['layout', 'onProgress', 'signal']) delete reading[key];
    const json = JSON.stringify(sorted({ ...options, read: reading }));
    text = createHash('sha256').update(json).digest('hex').slice(0, 32);
    known.set(options, text);
  }
  return text;
}

/** The same with the keys of all objects in order. */
function sorted(value: unknown): unknown {
  if (Array.isArray(value)) return value.map(sorted);
  if (typeof value === 'bigint') return `${value}n`;
  if (typeof value !== 'object' || value === null) return value;
  const entries = Object.entries(value).sort(([a], [b]) => (a < b ? -1 : 1));
  return Object.fromEntries(entries.map(([key, item]) => [key, sorted(item)]));
}
