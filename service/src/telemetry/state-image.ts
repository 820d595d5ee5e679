/**
 * Bytes of a part: SQLite keeps a row of at most 1002 bytes inside its page of 4096 (file format, "Index B-Tree Leaf
 * Cell"); larger ones would spill into pages of their own.
 */
export const PART_BYTES = 960;
const PART_WORDS = PART_BYTES / 4;

/**
 * A few typed arrays seen as one row of bytes in parts, against what was last written of it. Most of an axis's state
 * is memory of former blocks that changes about once a second of motion; only parts that changed are written.
 */
export class StateImage {
  private readonly words: readonly Int32Array[];
  private readonly written: Int32Array;
  private readonly now: Int32Array;
  /** False until everything was written once. */
  private known = false;

  constructor(arrays: readonly Float64Array[]) {
    this.words = arrays.map((array) => new Int32Array(array.buffer, array.byteOffset, 2 * array.length));
    const length = this.words.reduce((sum, { length: words }) => sum + words, 0);
    this.written = new Int32Array(length);
    this.now = scratchOf(length);
  }

  /** Number of parts. */
  get parts(): number {
    return Math.ceil(this.written.length / PART_WORDS);
  }

  /**
   * Gives each part whose bits are not those last given, and takes it as written from here on.
   *
   * @param write part number from 0, and its bytes, good until the call returns
   */
  writeChanged(write: (part: number, bytes: Buffer) => void): void {
    const { words, now, written } = this;
    let at = 0;
    for (const array of words) {
      now.set(array, at);
      at += array.length;
    }
    for (let part = 0, from = 0; from < written.length; part++, from += PART_WORDS) {
      const to = Math.min(written.length, from + PART_WORDS);
      if (this.known && sameWords(now, written, from, to)) continue;
      written.set(now.subarray(from, to), from);
      write(part, Buffer.from(now.buffer, 4 * from, 4 * (to - from)));
    }
    this.known = true;
  }

  /** Everything counts as changed again: the parts given last did not get into the database. */
  forget(): void {
    this.known = false;
  }

  /** @returns false, and changes nothing, when the parts are not those of these arrays */
  restore(parts: readonly Buffer[]): boolean {
    const saved = Buffer.concat(parts);
    if (saved.byteLength !== 4 * this.written.length || parts.length !== this.parts) return false;
    saved.copy(new Uint8Array(this.written.buffer));
    let at = 0;
    for (const array of this.words) {
      array.set(this.written.subarray(at, at + array.length));
      at += array.length;
    }
    this.known = true;
    return true;
  }
}

/** Compared as words, not as numbers: −0 is not 0 here, and NaN is itself. */
function sameWords(a: Int32Array, b: Int32Array, from: number, to: number): boolean {
  for (let i = from; i < to; i++) if (a[i] !== b[i]) return false;
  return true;
}

const scratches = new Map<number, Int32Array>();

/** All images of one size are put together in the same memory, one after another. */
function scratchOf(length: number): Int32Array {
  const scratch = scratches.get(length) ?? new Int32Array(length);
  scratches.set(length, scratch);
  return scratch;
}
