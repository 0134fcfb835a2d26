/** From a path or a stream of bytes to messages and planned batches, whichever format it has. */
import { InputError } from '../../errors.ts';
import { assertUnchanged, readExactly, type OpenFile } from '../files.ts';
import type { ReadOptions } from '../reading.ts';
import type { BatchPlanner, PlannedBatch } from './batches.ts';
import { assertNotAborted, FileCursor, readBlock, readFooter, streamMessages } from './framing.ts';
import { hasFileMagic } from './magic.ts';
import type { StreamCursor } from './sequential.ts';

/** Says whether a file has the file format, runs `work`, and notices if the file changes meanwhile. */
export async function withArrowFile<T>(
  file: OpenFile,
  work: (isFile: boolean) => Promise<T>,
): Promise<T> {
  try {
    const head = new Uint8Array(Math.min(file.size, 8));
    await readExactly(file, head, 0, head.length, 0);
    const result = await work(hasFileMagic(head));
    await assertUnchanged(file);
    return result;
  } catch (error) {
    // A file that is being written looks damaged; that it changes is the better message.
    if (error instanceof InputError) await assertUnchanged(file);
    throw error;
  }
}

/** Plans all batches of a file, whichever of the two formats it has. */
export async function planFile(
  file: OpenFile,
  isFile: boolean,
  planner: BatchPlanner,
  options: ReadOptions,
): Promise<PlannedBatch[]> {
  const batches: PlannedBatch[] = [];
  if (isFile) {
    const { schema, blocks } = await readFooter(file);
    planner.takeSchema(schema);
    const numbers = { dictionary: 0, batch: 0 };
    for (const block of blocks) {
      assertNotAborted(options.signal);
      const batch = await planner.take(await readBlock(file, block, numbers[block.kind]++));
      if (batch) batches.push(batch);
    }
    return batches;
  }
  const cursor = new FileCursor(file, 0, file.size);
  for await (const message of streamMessages(cursor, file.path, options.signal)) {
    const batch = await planner.take(message);
    if (batch) batches.push(batch);
  }
  return batches;
}

/** The messages of a stream, with an own error if there is not one byte. */
export async function* sequentialMessages(
  cursor: StreamCursor,
  name: string,
  options: ReadOptions,
): ReturnType<typeof streamMessages> {
  try {
    yield* streamMessages(cursor, name, options.signal);
  } catch (error) {
    if (cursor.position > 0 || (error as InputError).code !== 'input.notArrow') throw error;
    throw new InputError(
      'input.empty',
      `${name} is empty: 0 bytes on standard input; expected an Arrow stream`,
      'Look at the program that writes to it.',
    );
  }
}

export function countRows(batches: readonly Pick<PlannedBatch, 'rows'>[]): number {
  return batches.reduce((sum, { rows }) => sum + rows, 0);
}
