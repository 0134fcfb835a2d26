/** Puts Fortran length words around records, and around the subrecords of long ones. */
import type { FileHandle } from 'node:fs/promises';
import type { Layout } from './layout.ts';
import { TYPE_BYTES, writeNumber, type NumberType } from './types.ts';

/**
 * Writes records one after the other: `begin` with the bytes to come, `write` them in any pieces,
 * `end`. Without markers in the layout it writes the bytes alone.
 */
export class RecordWriter {
  readonly #handle: FileHandle;
  readonly #layout: Layout;
  readonly #limit: number;
  #left = 0;
  #inSubrecord = 0;
  #subrecord = 0;
  #isFirst = true;

  constructor(handle: FileHandle, layout: Layout, subrecordBytes: number) {
    this.#handle = handle;
    this.#layout = layout;
    this.#limit = layout.markers === 'fortran4' ? subrecordBytes : Infinity;
  }

  async begin(bytes: number): Promise<void> {
    this.#left = bytes;
    this.#isFirst = true;
    await this.#open();
  }

  async write(bytes: Uint8Array): Promise<void> {
    let done = 0;
    while (done < bytes.length) {
      if (this.#inSubrecord === 0) {
        await this.#close();
        this.#isFirst = false;
        await this.#open();
      }
      const part = Math.min(bytes.length - done, this.#inSubrecord);
      await this.#put(bytes.subarray(done, done + part));
      this.#inSubrecord -= part;
      this.#left -= part;
      done += part;
    }
  }

  async end(): Promise<void> {
    await this.#close();
  }

  async #open(): Promise<void> {
    this.#subrecord = Math.min(this.#left, this.#limit);
    this.#inSubrecord = this.#subrecord;
    await this.#word(this.#left > this.#limit ? -this.#subrecord : this.#subrecord);
  }

  async #close(): Promise<void> {
    await this.#word(this.#isFirst ? this.#subrecord : -this.#subrecord);
  }

  async #word(value: number): Promise<void> {
    const { markers, byteOrder } = this.#layout;
    if (markers === 'none') return;
    const type: NumberType = markers === 'fortran4' ? 'int32' : 'int64';
    const word = new DataView(new ArrayBuffer(TYPE_BYTES[type]));
    writeNumber(word, 0, type, byteOrder, value);
    await this.#put(new Uint8Array(word.buffer));
  }

  async #put(bytes: Uint8Array): Promise<void> {
    let done = 0;
    while (done < bytes.length) {
      const { bytesWritten } = await this.#handle.write(bytes, done, bytes.length - done);
      done += bytesWritten;
    }
  }
}
