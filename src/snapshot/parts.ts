/** Which files of a list are parts of one snapshot. */
import { basename, dirname, join } from 'node:path';
import { fileBytes } from './files.ts';
import { layoutFileOf, loadLayout } from './raw/find-layout.ts';
import { namesIn, presentParts } from './raw/part-names.ts';

export interface JoinedFile {
  /** The first part, or the file itself if it is a snapshot of its own. */
  readonly file: string;
  /** All parts that there are; null for a snapshot of its own. */
  readonly parts: readonly string[] | null;
}

/**
 * Finds for each file the snapshot that it belongs to. What is wrong with a layout or with the parts
 * is left to the reader, which says it.
 * @param files - with the layout that was named for each, if one was
 */
export async function joinFiles(
  files: readonly { readonly file: string; readonly layout: string | undefined }[],
): Promise<JoinedFile[]> {
  const patterns = new Map<string, Promise<string | null>>();
  const folders = new Map<string, Promise<readonly string[]>>();
  const patternIn = (layout: string): Promise<string | null> =>
    remembered(patterns, layout, () =>
      loadLayout(layout).then(
        ({ parts }) => parts ?? null,
        () => null,
      ),
    );
  const namesOf = (folder: string): Promise<readonly string[]> =>
    remembered(folders, folder, () => namesIn(folder).catch(() => []));
  const joined: JoinedFile[] = [];
  for (const { file, layout: given } of files) {
    const layout = file === '-' ? null : await layoutFileOf(file, given);
    const pattern = layout === null ? null : await patternIn(layout);
    const parts =
      pattern === null ? null : presentParts(file, pattern, await namesOf(dirname(file)));
    const isThere = parts?.includes(join(dirname(file), basename(file))) === true;
    joined.push(parts && isThere ? { file: parts[0], parts } : { file, parts: null });
  }
  return joined;
}

function remembered<T>(known: Map<string, Promise<T>>, key: string, find: () => Promise<T>) {
  const found = known.get(key) ?? find();
  known.set(key, found);
  return found;
}

/** Bytes of a snapshot, all its parts together; null for what is no regular file. */
export async function snapshotBytes({ file, parts }: JoinedFile): Promise<number | null> {
  let sum = 0;
  for (const path of parts ?? [file]) {
    const bytes = await fileBytes(path);
    if (bytes === null) return null;
    sum += bytes;
  }
  return sum;
}
