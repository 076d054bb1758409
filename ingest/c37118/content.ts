/** Reading and writing content of variable length, field by field: names carry their own length, so that no table of offsets can be made. Big-endian. */

export class ContentReader {
  readonly #bytes: Buffer;
  readonly #Problem: new (
    words: string,
  ) => Error;
  #at = 0;

  /** @param Problem  thrown when the content ends before a field does */
  constructor(bytes: Uint8Array, Problem: new (words: string) => Error) {
    this.#bytes = Buffer.from(bytes.buffer, bytes.byteOffset, bytes.length);
    this.#Problem = Problem;
  }

  get left(): number {
    return this.#bytes.length - this.#at;
  }

  need(bytes: number, what: string): void {
    if (bytes > this.left)
      throw new this.#Problem(`${what} needs ${bytes} bytes at ${this.#at} of the content, ${this.left} are left`);
  }

  #skip(bytes: number, what: string): number {
    this.need(bytes, what);
    this.#at += bytes;
    return this.#at - bytes;
  }

  u8 = (what: string): number => this.#bytes.readUInt8(this.#skip(1, what));
  u16 = (what: string): number => this.#bytes.readUInt16BE(this.#skip(2, what));
  i16 = (what: string): number => this.#bytes.readInt16BE(this.#skip(2, what));
  u32 = (what: string): number => this.#bytes.readUInt32BE(this.#skip(4, what));
  i32 = (what: string): number => this.#bytes.readInt32BE(this.#skip(4, what));
  f32 = (what: string): number => this.#bytes.readFloatBE(this.#skip(4, what));

  hex(bytes: number, what: string): string {
    const at = this.#skip(bytes, what);
    return this.#bytes.toString("hex", at, at + bytes);
  }

  /** One byte of length, then UTF-8. */
  name(what: string): string {
    const length = this.u8(what);
    const at = this.#skip(length, what);
    return this.#bytes
      .toString("utf8", at, at + length)
      .replaceAll("\0", " ")
      .trimEnd();
  }
}

export class ContentWriter {
  readonly #pieces: Buffer[] = [];

  #put(bytes: number, write: (piece: Buffer) => void): void {
    const piece = Buffer.alloc(bytes);
    write(piece);
    this.#pieces.push(piece);
  }

  u8 = (value: number): void => this.#put(1, (b) => b.writeUInt8(value));
  u16 = (value: number): void => this.#put(2, (b) => b.writeUInt16BE(value));
  u32 = (value: number): void => this.#put(4, (b) => b.writeUInt32BE(value));
  f32 = (value: number): void => this.#put(4, (b) => b.writeFloatBE(value));

  hex(text: string): void {
    this.#pieces.push(Buffer.from(text, "hex"));
  }

  /** Cut at 255 bytes, never inside a letter. */
  name(text: string): void {
    let cut = text;
    while (Buffer.byteLength(cut) > 255) cut = cut.slice(0, -1);
    const bytes = Buffer.from(cut);
    this.u8(bytes.length);
    this.#pieces.push(bytes);
  }

  bytes = (): Buffer => Buffer.concat(this.#pieces);
}
