/** Where the messages of an Arrow file or stream begin and end, checked against the bytes there are. */
import { InputError, InterruptedError } from '../../errors.ts';
import { readExactly, type OpenFile } from '../files.ts';
import type { Body } from './body.ts';
import { cut, damaged } from './damage.ts';
import { decodeFooter, decodeMessage, typeName, type ArrowMessage } from './messages.ts';
import type { Block, Schema } from './messages.ts';

/** `ARROW1` and two bytes of padding. */
const FILE_HEAD_BYTES = 8;
/** Length of the footer and `ARROW1`. */
const FILE_TAIL_BYTES = 10;
const PREFIX_BYTES = 8;
const CONTINUATION = 0xffffffff;
const MOST_METADATA_BYTES = 2 ** 28;
/** Writers align messages to 8 or 64 bytes; a lost message would leave a wider gap. */
const WIDEST_PADDING = 64;

/** Bytes taken in order. */
export interface Cursor {
  readonly position: number;
  /** The next `count` bytes, fewer only at the end. */
  take(count: number): Promise<Uint8Array>;
  /** The next `count` bytes as a body, or null if there are not so many. */
  takeBody(count: number): Promise<Body | null>;
}

/** One message with its body; `place` names it in messages of errors. */
export interface FramedMessage {
  readonly message: ArrowMessage;
  readonly body: Body;
  readonly place: string;
}

export function assertNotAborted(signal: AbortSignal | undefined): void {
  if (signal?.aborted) throw new InterruptedError();
}

export class FileCursor implements Cursor {
  position: number;
  private readonly file: OpenFile;
  private readonly end: number;

  constructor(file: OpenFile, begin: number, end: number) {
    this.file = file;
    this.position = begin;
    this.end = end;
  }

  async take(count: number): Promise<Uint8Array> {
    const bytes = new Uint8Array(Math.min(count, this.end - this.position));
    await readExactly(this.file, bytes, 0, bytes.length, this.position);
    this.position += bytes.length;
    return bytes;
  }

  takeBody(count: number): Promise<Body | null> {
    if (count > this.end - this.position) return Promise.resolve(null);
    const body = { file: this.file, begin: this.position };
    this.position += count;
    return Promise.resolve(body);
  }
}

/**
 * The messages of a stream, up to its end marker.
 * @throws InputError `input.notArrow`, `input.arrowDamaged`, `input.arrowCut` (no end marker)
 * Source: Apache Arrow columnar format 1.5, "Encapsulated message format", "IPC Streaming Format".
 */
export async function* streamMessages(
  cursor: Cursor,
  file: string,
  signal?: AbortSignal,
): AsyncGenerator<FramedMessage, void, void> {
  for (let number = 0; ; number++) {
    assertNotAborted(signal);
    const place = `message ${number} at byte ${cursor.position}`;
    const prefix = await cursor.take(PREFIX_BYTES);
    if (prefix.length === 0 && number > 0)
      throw cut(
        file,
        `it ends at byte ${cursor.position} after ${number} messages`,
        'an end marker (FF FF FF FF 00 00 00 00)',
      );
    if (number === 0) assertBeginsAsArrow(prefix, file);
    const length = metadataLength(prefix, file, place);
    if (length === 0) {
      if ((await cursor.take(1)).length > 0)
        throw damaged(file, `byte ${cursor.position - 1}`, 'bytes follow the end marker');
      return;
    }
    const metadata = await cursor.take(length);
    if (metadata.length < length)
      throw cut(
        file,
        `${place} ends after ${metadata.length} bytes of metadata`,
        `${length} bytes`,
      );
    const message = decodeMessage(metadata, file, place);
    const bodyBegin = cursor.position;
    const body = await cursor.takeBody(message.bodyLength);
    if (!body)
      throw cut(
        file,
        `the body of ${place} begins at byte ${bodyBegin} and does not end`,
        `${message.bodyLength} bytes`,
      );
    yield { message, body, place };
  }
}

function assertBeginsAsArrow(prefix: Uint8Array, file: string): void {
  if (prefix.length >= 4 && prefix.subarray(0, 4).every((byte) => byte === 0xff)) return;
  const found = [...prefix.subarray(0, 6)].map((byte) => byte.toString(16).padStart(2, '0'));
  throw new InputError(
    'input.notArrow',
    `${file} is not Arrow: it begins with the bytes ${found.join(' ') || '(none)'}; expected "ARROW1" (file) or ff ff ff ff (stream)`,
    'If it is raw binary, give it another ending and describe it with --layout.',
  );
}

function metadataLength(prefix: Uint8Array, file: string, place: string): number {
  if (prefix.length < PREFIX_BYTES)
    throw cut(file, `${place} has ${prefix.length} bytes`, `a prefix of ${PREFIX_BYTES} bytes`);
  const view = new DataView(prefix.buffer, prefix.byteOffset, prefix.byteLength);
  if (view.getUint32(0, true) !== CONTINUATION)
    throw damaged(file, place, 'it does not begin with ff ff ff ff');
  const length = view.getInt32(4, true);
  if (length < 0 || length > MOST_METADATA_BYTES)
    throw damaged(file, place, `metadata of ${length} bytes`);
  return length;
}

/**
 * Reads the footer of a file and checks that schema, blocks and footer lie gapless one after the
 * other, so that no batch is lost by a damaged footer.
 * @throws InputError `input.arrowCut`, `input.arrowDamaged`
 * Source: Apache Arrow columnar format 1.5, "IPC File Format".
 */
export async function readFooter(
  file: OpenFile,
): Promise<{ readonly schema: Schema; readonly blocks: readonly Block[] }> {
  const { path, size } = file;
  if (size < FILE_HEAD_BYTES + PREFIX_BYTES + FILE_TAIL_BYTES)
    throw cut(path, `it has ${size} bytes`, 'a schema, batches and a footer');
  const tail = new Uint8Array(FILE_TAIL_BYTES);
  await readExactly(file, tail, 0, tail.length, size - tail.length);
  if (new TextDecoder('latin1').decode(tail.subarray(4)) !== 'ARROW1')
    throw cut(
      path,
      `it begins as an Arrow file and does not end as one`,
      'its last bytes "ARROW1"',
    );
  const length = new DataView(tail.buffer).getInt32(0, true);
  const footerBegin = size - FILE_TAIL_BYTES - length;
  if (length <= 0 || footerBegin < FILE_HEAD_BYTES)
    throw damaged(path, 'its footer', `it has ${length} bytes of ${size}`);
  const bytes = new Uint8Array(length);
  await readExactly(file, bytes, 0, length, footerBegin);
  const footer = decodeFooter(bytes, path);

  const cursor = new FileCursor(file, FILE_HEAD_BYTES, footerBegin);
  const { value: first } = await streamMessages(cursor, path).next();
  if (first?.message.kind !== 'schema') {
    // apache-arrow in JavaScript writes the schema into the footer alone: then the batches begin at once.
    assertGapless(footer.blocks, FILE_HEAD_BYTES, footerBegin, path);
    return footer;
  }
  if (signature(first.message.schema) !== signature(footer.schema))
    throw damaged(path, 'its footer', 'the schema in it is not the schema at the beginning');
  assertGapless(footer.blocks, cursor.position, footerBegin, path);
  return footer;
}

function signature(schema: Schema): string {
  return schema.fields.map(({ name, type }) => `${name}: ${typeName(type)}`).join(', ');
}

function assertGapless(blocks: readonly Block[], begin: number, end: number, path: string): void {
  let at = begin;
  for (const block of [...blocks].sort((a, b) => a.offset - b.offset)) {
    const { offset, metadataLength, bodyLength } = block;
    if (metadataLength < PREFIX_BYTES || bodyLength < 0 || offset < at)
      throw damaged(
        path,
        'its footer',
        `a batch of ${metadataLength} + ${bodyLength} bytes at byte ${offset} overlaps another`,
      );
    if (offset - at > WIDEST_PADDING)
      throw damaged(path, `byte ${at}`, `${offset - at} bytes belong to no batch of the footer`);
    at = offset + metadataLength + bodyLength;
  }
  if (at > end)
    throw damaged(path, 'its footer', `a batch ends at byte ${at}, after the footer at ${end}`);
  if (end - at > WIDEST_PADDING + PREFIX_BYTES)
    throw damaged(path, `byte ${at}`, `${end - at} bytes belong to no batch of the footer`);
}

/** Reads the message of one block of a file. */
export async function readBlock(
  file: OpenFile,
  block: Block,
  number: number,
): Promise<FramedMessage> {
  const { offset, metadataLength: length, bodyLength } = block;
  const place = `${block.kind === 'batch' ? 'record batch' : 'dictionary'} ${number} at byte ${offset}`;
  const bytes = new Uint8Array(length);
  await readExactly(file, bytes, 0, length, offset);
  const inner = metadataLength(bytes.subarray(0, PREFIX_BYTES), file.path, place);
  if (inner === 0 || inner + PREFIX_BYTES > length)
    throw damaged(file.path, place, `metadata of ${inner} bytes in a block of ${length}`);
  const metadata = bytes.subarray(PREFIX_BYTES, PREFIX_BYTES + inner);
  const message = decodeMessage(metadata, file.path, place);
  if (message.kind !== block.kind || message.bodyLength !== bodyLength)
    throw damaged(
      file.path,
      place,
      `a ${message.kind} of ${message.bodyLength} bytes where the footer says a ${block.kind} of ${bodyLength}`,
    );
  return { message, body: { file, begin: offset + length }, place };
}
