/** An Arrow stream that can be read only once, in order: standard input. */
import { InputError, InterruptedError, SettlemarkError } from '../../errors.ts';
import type { Body } from './body.ts';
import type { Cursor } from './framing.ts';

/**
 * Takes bytes from a stream in order. A body is held in memory until it is loaded.
 * @see {@link fromStandardInput} for the stream that `-` means
 */
export class StreamCursor implements Cursor {
  position = 0;
  private readonly chunks: AsyncIterator<Uint8Array>;
  private readonly file: string;
  private readonly signal: AbortSignal | undefined;
  private rest: Uint8Array = new Uint8Array(0);

  constructor(source: AsyncIterable<Uint8Array>, file: string, signal: AbortSignal | undefined) {
    this.chunks = source[Symbol.asyncIterator]();
    this.file = file;
    this.signal = signal;
  }

  async take(count: number): Promise<Uint8Array> {
    const parts: Uint8Array[] = [];
    const taken = await this.collect(count, (part) => parts.push(part));
    const bytes = new Uint8Array(taken);
    let at = 0;
    for (const part of parts) {
      bytes.set(part, at);
      at += part.length;
    }
    return bytes;
  }

  async takeBody(count: number): Promise<Body | null> {
    let bytes: Uint8Array;
    try {
      // Memory that is never touched costs nothing, so a damaged length does no harm here.
      bytes = new Uint8Array(count);
    } catch (error) {
      throw new InputError(
        'input.tooLarge',
        `${this.file}: a batch of ${count} bytes at byte ${this.position} does not fit into memory`,
        'Write smaller batches, or a file instead of a stream; or the stream is damaged.',
        { cause: error },
      );
    }
    let at = 0;
    const taken = await this.collect(count, (part) => {
      bytes.set(part, at);
      at += part.length;
    });
    return taken === count ? bytes : null;
  }

  /** Hands on the next `count` bytes in parts; gives how many there were. */
  private async collect(count: number, take: (part: Uint8Array) => void): Promise<number> {
    let taken = 0;
    while (taken < count) {
      if (this.rest.length === 0) {
        const next = await this.nextChunk();
        if (next === null) break;
        this.rest = next;
        continue;
      }
      const part = this.rest.subarray(0, count - taken);
      this.rest = this.rest.subarray(part.length);
      take(part);
      taken += part.length;
      this.position += part.length;
    }
    return taken;
  }

  private async nextChunk(): Promise<Uint8Array | null> {
    const { signal } = this;
    if (signal?.aborted) throw new InterruptedError();
    let abort: (() => void) | undefined;
    try {
      const next = this.chunks.next();
      // The wait for the other end of a pipe has no end of its own.
      const aborted = new Promise<never>((_, reject) => {
        abort = () => {
          reject(new InterruptedError());
        };
        signal?.addEventListener('abort', abort, { once: true });
      });
      next.catch(() => undefined);
      const result = await Promise.race([next, aborted]);
      return result.done === true ? null : result.value;
    } catch (error) {
      if (error instanceof SettlemarkError) throw error;
      throw new InputError(
        'input.unreadable',
        `${this.file} could not be read after byte ${this.position}: ${error instanceof Error ? error.message : String(error)}`,
        'Look at the program that writes to it.',
        { cause: error },
      );
    } finally {
      if (abort) signal?.removeEventListener('abort', abort);
    }
  }
}

/** Standard input as chunks of bytes. */
export function fromStandardInput(): AsyncIterable<Uint8Array> {
  return process.stdin as AsyncIterable<Uint8Array>;
}
