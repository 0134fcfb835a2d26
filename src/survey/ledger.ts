/**
 * The ledger of a run: records that were made, kept beside the snapshots, so that a second look
 * measures only what is new.
 *
 * One line of JSON a record, only ever appended. A line that a crash or a full disk tore is passed
 * over, and its snapshot is measured again; a line of another version stays where it is.
 */
import { createReadStream } from 'node:fs';
import { open, type FileHandle } from 'node:fs/promises';
import { dirname, resolve } from 'node:path';
import type { MeasureRecord } from '../dynamics/record.ts';
import { InputError } from '../errors.ts';
import { linesOf } from '../snapshot/lines.ts';
import type { Remark } from '../snapshot/particles.ts';
import { figureOptions, fingerprint, sameFile, sourcesOf, type Source } from './fingerprint.ts';
import type { PreparedSnapshot } from './prepare.ts';
import { BEFORE_READING } from './times.ts';

/** Form of a line of the ledger. */
const LEDGER_VERSION = 1;
/** Raised whenever the same bytes and options give other figures than before: see CHANGELOG.md. */
export const FIGURES_VERSION = 1;

/** What a line says before the record: files as they were, named from the folder of the ledger. */
interface Head {
  readonly ledger: number;
  readonly figures: number;
  readonly options: string;
  /** When the files were looked at [ms since 1970]. */
  readonly seen: number;
  readonly files: readonly (Source & { readonly sha256: string })[];
}

interface Entry extends Head {
  /** The record as JSON, parsed when it is asked for. */
  readonly json: string;
}

/** The record comes last in a line; inside a text of JSON these quotes would be escaped. */
const BEFORE_RECORD = ',"record":';

export class Ledger {
  readonly path: string;
  /** What was found in the file that could not be used, and what could not be kept. */
  readonly remarks: Remark[] = [];
  readonly #folder: string;
  /** By options and bytes. */
  readonly #byContent = new Map<string, Entry>();
  /** By options and name of the file itself: the entry that was made last. */
  readonly #byName = new Map<string, Entry>();
  readonly #sizes = new Set<string>();
  #handle: Promise<FileHandle> | null = null;
  #isTorn = false;
  #failed = false;

  private constructor(path: string) {
    this.path = path;
    this.#folder = dirname(resolve(path));
  }

  /**
   * Reads a ledger; one that is not there yet is empty.
   * @throws InputError `input.notALedger` if the file is something else: nothing is appended to it then;
   *   `input.unreadable` if it cannot be read
   */
  static async open(path: string): Promise<Ledger> {
    const ledger = new Ledger(path);
    await ledger.#load();
    return ledger;
  }

  /** Number of records that can be used. */
  get size(): number {
    return this.#byContent.size;
  }

  /** The record of a snapshot as it is now on disk, or null if it must be measured. */
  async find(snapshot: PreparedSnapshot): Promise<MeasureRecord | null> {
    const key = keyOf(snapshot);
    let sources: readonly Source[];
    try {
      sources = await sourcesOf(snapshot, this.#folder);
    } catch {
      return null; // The reader says what is wrong with it.
    }
    const last = this.#byName.get(`${key} ${sources[0].name}`);
    if (last !== undefined && isUntouched(last, sources)) return recordOf(last, snapshot);
    // Bytes are read only where some entry could be of them.
    if (!this.#sizes.has(`${key} ${bytesOf(sources)}`)) return null;
    const sums = await fingerprint(sources, this.#folder).catch(() => null);
    const same = sums && this.#byContent.get(`${key} ${sums.join(' ')}`);
    if (sums === null || !same) return null;
    const record = recordOf(same, snapshot);
    // Known by another name or date: noted, if that spares reading it the next time.
    const head = this.#headOf(key, sources, sums);
    if (record !== null && isUntouched(head, sources)) await this.#append(head, same.json);
    return record;
  }

  /**
   * Keeps a record.
   * @param before - what {@link look} gave before the snapshot was measured: if its files have changed
   *   since, the record is of neither state and is not kept
   */
  async keep(
    snapshot: PreparedSnapshot,
    before: readonly Source[] | null,
    record: MeasureRecord,
  ): Promise<void> {
    if (before === null || this.#failed) return;
    const sums = await fingerprint(before, this.#folder).catch(() => null);
    const after = await this.look(snapshot);
    if (sums === null || after === null || !before.every((source, k) => sameFile(source, after[k])))
      return;
    const head = this.#headOf(keyOf(snapshot), after, sums);
    await this.#append(head, JSON.stringify(record));
  }

  /** The files of a snapshot as they are now; null if they cannot be looked at, or are no files. */
  async look(snapshot: PreparedSnapshot): Promise<readonly Source[] | null> {
    return sourcesOf(snapshot, this.#folder).catch(() => null);
  }

  /** Makes sure that what was kept is on the disk. */
  async close(): Promise<void> {
    const handle = await this.#handle?.catch(() => null);
    this.#handle = null;
    if (!handle) return;
    await handle.datasync().catch((error: unknown) => this.#giveUp(error));
    await handle.close();
  }

  #headOf(options: string, sources: readonly Source[], sums: readonly string[]): Head {
    const files = sources.map((source, k) => ({ ...source, sha256: sums[k] }));
    return { ledger: LEDGER_VERSION, figures: FIGURES_VERSION, options, seen: Date.now(), files };
  }

  async #load(): Promise<void> {
    let lines = 0;
    let torn = 0;
    let other = 0;
    try {
      for await (const line of linesOf(createReadStream(this.path))) {
        if (line === '') continue;
        lines++;
        const entry = entryIn(line);
        if (entry === null) torn++;
        else if (entry.ledger !== LEDGER_VERSION || entry.figures !== FIGURES_VERSION) other++;
        else this.#index(entry);
      }
    } catch (error) {
      if ((error as NodeJS.ErrnoException).code === 'ENOENT') return;
      const reason = error instanceof Error ? error.message : String(error);
      throw new InputError(
        'input.unreadable',
        `the ledger ${this.path} could not be read: ${reason}`,
        'Name another file with --ledger, or work without one: --no-ledger.',
        { cause: error },
      );
    }
    if (lines > 0 && torn === lines) {
      throw new InputError(
        'input.notALedger',
        `${this.path} is not a ledger of Settlemark: none of its ${lines} line(s) is a record that was kept`,
        'Name another file with --ledger; this one is left as it is.',
      );
    }
    if (torn > 0) {
      this.remarks.push({
        code: 'ledgerTorn',
        text: `${torn} of ${lines} lines of the ledger ${this.path} are not whole, as after a crash or a full disk, and are passed over`,
        remedy: 'nothing needs to be done: their snapshots are measured again',
      });
    }
    if (other > 0) {
      this.remarks.push({
        code: 'ledgerOfOtherVersion',
        text: `${other} of ${lines} records in the ledger ${this.path} were made by another version of Settlemark and are set aside`,
        remedy:
          'nothing needs to be done: they stay in the file, and their snapshots are measured again',
      });
    }
  }

  #index(entry: Entry): void {
    const sums = entry.files.map(({ sha256 }) => sha256).join(' ');
    this.#byContent.set(`${entry.options} ${sums}`, entry);
    this.#byName.set(`${entry.options} ${entry.files[0].name}`, entry);
    this.#sizes.add(`${entry.options} ${bytesOf(entry.files)}`);
  }

  async #append(head: Head, json: string): Promise<void> {
    if (this.#failed) return;
    const line = `${JSON.stringify(head).slice(0, -1)}${BEFORE_RECORD}${json}}\n`;
    try {
      const handle = await (this.#handle ??= this.#openToAppend());
      const bytes = Buffer.from(this.#isTorn ? `\n${line}` : line);
      // One call, so that lines of several processes do not mix.
      const { bytesWritten } = await handle.write(bytes, 0, bytes.length);
      this.#isTorn = bytesWritten < bytes.length;
      if (this.#isTorn) throw new Error('the disk is full');
      this.#index({ ...head, json });
    } catch (error) {
      this.#giveUp(error);
    }
  }

  async #openToAppend(): Promise<FileHandle> {
    const handle = await open(this.path, 'a+');
    const { size } = await handle.stat();
    const end = Buffer.alloc(1);
    if (size > 0) await handle.read(end, 0, 1, size - 1);
    this.#isTorn = size > 0 && end.toString() !== '\n';
    return handle;
  }

  /** A run is measured whether or not its records can be kept. */
  #giveUp(error: unknown): void {
    if (this.#failed) return;
    this.#failed = true;
    const reason = error instanceof Error ? error.message : String(error);
    this.remarks.push({
      code: 'ledgerNotKept',
      text: `records could not be kept in the ledger ${this.path}: ${reason}`,
      remedy:
        'free some space, or name a file that can be written with --ledger; the figures are not affected',
    });
  }
}

/** A line as an entry; null if it is not whole. */
function entryIn(line: string): Entry | null {
  const at = line.indexOf(BEFORE_RECORD);
  if (at < 0 || !line.endsWith('}}')) return null;
  try {
    const head = JSON.parse(`${line.slice(0, at)}}`) as Partial<Head>;
    if (typeof head.ledger !== 'number') return null;
    if (head.ledger !== LEDGER_VERSION) return { ...(head as Head), json: '' };
    const isWhole = Array.isArray(head.files) && head.files.length > 0 && head.seen !== undefined;
    return isWhole ? { ...(head as Head), json: line.slice(at + BEFORE_RECORD.length, -1) } : null;
  } catch {
    return null;
  }
}

/** Options that change a figure, and the time if it was stated from outside. */
function keyOf({ options, time }: PreparedSnapshot): string {
  const key = figureOptions(options);
  return time === null ? key : `${key} ${time.value} ${time.source} ${time.from}`;
}

/** The record under the names that its files have now, with what was found this time before reading. */
function recordOf({ json }: Entry, snapshot: PreparedSnapshot): MeasureRecord | null {
  const { file, runFile, remarks: found } = snapshot;
  try {
    const record = JSON.parse(json) as MeasureRecord;
    const earlier = record.remarks.filter(({ code }) => BEFORE_READING.has(code));
    const isSame = JSON.stringify(earlier) === JSON.stringify(found);
    const others = record.remarks.filter((remark) => !earlier.includes(remark));
    return { ...record, file, runFile, remarks: isSame ? record.remarks : [...found, ...others] };
  } catch {
    return null;
  }
}

const bytesOf = (sources: readonly Source[]) => sources.map(({ bytes }) => bytes).join(' ');

/** Clocks of file systems tick as slowly as this: what changed just before it was seen may have changed after. */
const TICK_MS = 2000;

function isUntouched(entry: Head, sources: readonly Source[]): boolean {
  return (
    entry.files.length === sources.length &&
    entry.files.every(
      (file, k) => sameFile(file, sources[k]) && entry.seen - file.changed > TICK_MS,
    )
  );
}
