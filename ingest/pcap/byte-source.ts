/** A file read front to back, some bytes at a time. */
import { readSync } from "node:fs";

const CHUNK_BYTES = 256 * 1024;

export class ByteSource {
  readonly #file: number;
  #held = Buffer.alloc(0);
  #at = 0;
  #position = 0;

  constructor(file: number) {
    this.#file = file;
  }

  /** The next `count` bytes, valid until the next call; undefined when fewer are left. */
  take(count: number): Buffer | undefined {
    if (this.#held.length - this.#at < count) {
      const next = Buffer.alloc(Math.max(CHUNK_BYTES, count));
      const kept = this.#held.copy(next, 0, this.#at);
      let filled = kept;
      while (filled < next.length) {
        const got = readSync(this.#file, next, filled, next.length - filled, this.#position);
        if (got === 0) break;
        filled += got;
        this.#position += got;
      }
      this.#held = next.subarray(0, filled);
      this.#at = 0;
      if (filled < count) return undefined;
    }
    this.#at += count;
    return this.#held.subarray(this.#at - count, this.#at);
  }

  get isAtEnd(): boolean {
    const byte = this.take(1);
    if (byte) this.#at--;
    return byte === undefined;
  }
}
