/** Recognises Arrow IPC by its first bytes, else by the ending of the name. */

const FILE_MAGIC = 'ARROW1';
const STREAM_ENDINGS = ['.arrows', '.ipc'];
const FILE_ENDINGS = ['.arrow', '.feather'];

/**
 * Says whether these bytes begin an Arrow IPC file or stream.
 *
 * A file begins with `ARROW1`; a stream with the continuation marker 0xFFFFFFFF of its first
 * message. The marker alone would also fit four bytes of raw data (it is a float32 NaN), so the
 * length of the message after it must be a positive multiple of 8 below 2²⁸. Where the bytes say
 * nothing, the ending of `path` decides, so that a damaged `.arrow` is reported as Arrow.
 * @param head - the first 8 bytes or more, fewer if the file is shorter
 * Source: Apache Arrow columnar format 1.5, "IPC File Format", "Encapsulated message format".
 */
export function looksLikeArrow(
  head: Uint8Array,
  path: string,
): 'arrow-file' | 'arrow-stream' | null {
  if (hasFileMagic(head)) return 'arrow-file';
  if (head.length >= 8) {
    const view = new DataView(head.buffer, head.byteOffset, head.byteLength);
    const length = view.getInt32(4, true);
    if (
      view.getUint32(0, true) === 0xffffffff &&
      length > 0 &&
      length % 8 === 0 &&
      length < 2 ** 28
    )
      return 'arrow-stream';
  }
  const name = path.toLowerCase();
  if (STREAM_ENDINGS.some((ending) => name.endsWith(ending))) return 'arrow-stream';
  if (FILE_ENDINGS.some((ending) => name.endsWith(ending))) return 'arrow-file';
  return null;
}

/** Whether the bytes begin with the magic of the file format. */
export function hasFileMagic(bytes: Uint8Array): boolean {
  if (bytes.length < FILE_MAGIC.length) return false;
  for (let i = 0; i < FILE_MAGIC.length; i++) {
    if (bytes[i] !== FILE_MAGIC.charCodeAt(i)) return false;
  }
  return true;
}
