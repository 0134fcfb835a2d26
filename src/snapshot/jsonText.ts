/** JSON that people write by hand: where it stops being JSON, and where in it a key stands. */

/** A place in a text; line and column count from 1. */
export interface TextPlace {
  readonly line: number;
  readonly column: number;
}

/**
 * Parses JSON; a byte order mark before it is passed over.
 * @param refuse - throws the error for a text that is not JSON; gets the place of the first wrong
 *   character, that character in quotes or the words for the end of the text, and the cause
 */
export function parseJson(
  text: string,
  refuse: (at: TextPlace & { readonly found: string }, cause: unknown) => never,
): unknown {
  const json = text.replace(/^\uFEFF/, '');
  try {
    return JSON.parse(json) as unknown;
  } catch (error) {
    const at = firstBadCharacter(json);
    const found = at < json.length ? JSON.stringify(json[at]) : 'the end of the text';
    return refuse({ ...placeAt(json, at), found }, error);
  }
}

function placeAt(text: string, index: number): TextPlace {
  const before = text.slice(0, index);
  return { line: before.split('\n').length, column: before.length - before.lastIndexOf('\n') };
}

/**
 * Index of the character at which the text stops being JSON. Not every message of the engine tells
 * the position, but whether a beginning of the text is only too short or already wrong it does.
 */
function firstBadCharacter(text: string): number {
  let good = 0;
  let bad = text.length + 1;
  while (bad - good > 1) {
    const middle = (good + bad) >> 1;
    if (isWrong(text.slice(0, middle))) bad = middle;
    else good = middle;
  }
  return good;
}

function isWrong(beginning: string): boolean {
  try {
    JSON.parse(beginning);
    return false;
  } catch (error) {
    const message = error instanceof Error ? error.message : '';
    const position = /position (\d+)/.exec(message)?.[1];
    return position === undefined
      ? !message.includes('end of JSON')
      : Number(position) < beginning.length;
  }
}

/** Where the keys and values of a JSON text stand. */
export interface JsonPlaces {
  /** Place of the value at `path`; of the nearest thing around it if it is not there. */
  readonly valueAt: (path: readonly PropertyKey[]) => TextPlace;
  /** Place of a key of the object at `path`; that of the object if it has no such key. */
  readonly keyAt: (path: readonly PropertyKey[], key: string) => TextPlace;
  /** The first key that stands in one object twice, or null: JSON itself keeps the last in silence. */
  readonly twice: (TextPlace & { readonly key: string }) | null;
}

/** Finds places in a text that is JSON. YAML's parser reads JSON too, and remembers where it was. */
export async function jsonPlaces(text: string): Promise<JsonPlaces> {
  const { isMap, isScalar, isSeq, LineCounter, parseDocument } = await import('yaml');
  const lines = new LineCounter();
  const json = text.replace(/^\uFEFF/, '');
  const document = parseDocument(json, { lineCounter: lines, logLevel: 'silent' });
  const placed = (offset: number): TextPlace => {
    const { line, col } = lines.linePos(offset);
    return { line: Math.max(1, line), column: Math.max(1, col) };
  };
  const startOf = (node: unknown): number | null => {
    const range = (node as { range?: readonly number[] | null } | null)?.range;
    return range ? range[0] : null;
  };
  const keyOf = (node: unknown, key: PropertyKey) =>
    isMap(node)
      ? node.items.find((pair) => isScalar(pair.key) && pair.key.value === key)
      : undefined;
  const follow = (path: readonly PropertyKey[]) => {
    let node: unknown = document.contents;
    let offset = startOf(node) ?? 0;
    for (const step of path) {
      node = isSeq(node) ? node.items[Number(step)] : keyOf(node, step)?.value;
      const start = startOf(node);
      if (start === null) break;
      offset = start;
    }
    return { node, offset };
  };
  const duplicate = document.errors.find(({ code }) => code === 'DUPLICATE_KEY');
  return {
    valueAt: (path) => placed(follow(path).offset),
    keyAt: (path, key) => {
      const { node, offset } = follow(path);
      return placed(startOf(keyOf(node, key)?.key) ?? offset);
    },
    twice: duplicate
      ? {
          ...placed(duplicate.pos[0]),
          key: /"(?:[^"\\]|\\.)*"/.exec(json.slice(duplicate.pos[0]))?.[0] ?? '',
        }
      : null,
  };
}
