/** Codes of components in a raw file, any whole numbers, become indices into a list of names. */
import { InputError } from '../../errors.ts';
import { decodeReals, type Chunk } from './decode.ts';
import { NATIVE_ORDER, type ByteOrder, type NumberType } from './types.ts';

const BATCH = 8192;
const COMPONENTS_AT_MOST = 65536;

export class ComponentCodes {
  readonly column: Uint16Array;
  readonly #file: string;
  readonly #batch = new Float64Array(BATCH);
  readonly #indexOf = new Map<number, number>();

  constructor(file: string, count: number) {
    this.#file = file;
    this.column = new Uint16Array(new SharedArrayBuffer(count * 2));
  }

  /** Takes the codes of `count` bodies; see {@link decodeReals} for the other arguments. */
  decode(
    chunk: Chunk,
    offset: number,
    stride: number,
    type: NumberType,
    order: ByteOrder,
    scale: number,
    at: number,
    count: number,
  ): void {
    const isNative = order === NATIVE_ORDER;
    for (let done = 0; done < count; done += BATCH) {
      const batch = Math.min(BATCH, count - done);
      const from = offset + done * stride;
      decodeReals(chunk, from, stride, type, order, isNative, scale, this.#batch, 0, batch);
      let lastCode = NaN;
      let lastIndex = 0;
      for (let i = 0; i < batch; i++) {
        const code = this.#batch[i];
        // Neighbours mostly belong together: a look into the map for each would be slow.
        if (code !== lastCode) {
          lastIndex = this.#indexOf.get(code) ?? this.#add(code, at + done + i);
          lastCode = code;
        }
        this.column[at + done + i] = lastIndex;
      }
    }
  }

  #add(code: number, body: number): number {
    if (!Number.isSafeInteger(code) || this.#indexOf.size === COMPONENTS_AT_MOST) {
      throw new InputError(
        'input.component',
        `${this.#file}: the component of body ${body} is ${code}; expected ${
          Number.isSafeInteger(code)
            ? `at most ${COMPONENTS_AT_MOST} different components`
            : 'a whole number'
        }`,
        'Correct type or offset of the field in the layout, or rename it.',
      );
    }
    const index = this.#indexOf.size;
    this.#indexOf.set(code, index);
    return index;
  }

  /** Puts the components into the order of their codes; returns the codes as names. */
  finish(): string[] {
    const codes = [...this.#indexOf.keys()].sort((a, b) => a - b);
    const newIndex = new Uint16Array(codes.length);
    let moved = false;
    codes.forEach((code, index) => {
      const old = this.#indexOf.get(code) ?? 0;
      newIndex[old] = index;
      moved ||= old !== index;
    });
    const { column } = this;
    if (moved) for (let i = 0; i < column.length; i++) column[i] = newIndex[column[i]];
    return codes.map(String);
  }
}
