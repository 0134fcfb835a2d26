/** The body of one message: plain data, which can be sent to a worker. */
import { readExactly, type OpenFile } from '../files.ts';

/** A stretch of a file, or bytes in memory. */
export type Body = { readonly file: OpenFile; readonly begin: number } | Uint8Array;

/** Fills `target` with the bytes from `offset` of the body on; the caller keeps inside. */
export async function readBody(body: Body, target: Uint8Array, offset: number): Promise<void> {
  if (body instanceof Uint8Array) target.set(body.subarray(offset, offset + target.length));
  else await readExactly(body.file, target, 0, target.length, body.begin + offset);
}
