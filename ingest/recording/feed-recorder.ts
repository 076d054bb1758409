/**
 * One feed's frames in rotating files, each usable alone: it begins with the configuration in force. Beside each stands an index for seeking by time.
 *
 * `FEED/TIME.frames`  frames back to back; TIME is the first tag [µs since 1970 UTC], so that names sort by time
 * `FEED/TIME.index`   pairs of float64, little-endian: a data frame's tag [µs], the byte it starts at; one a second
 *
 * A crash may tear the last frame and the last pair; readers cut both. Written in batches by one timer for all feeds, so that recording costs a copy.
 */
import { createWriteStream, readdirSync, rmSync, statSync, type WriteStream } from "node:fs";
import { join } from "node:path";
import { timeUsOf, typeOf } from "../c37118/index.ts";
import { makeRecordingFolder } from "../recording-error.ts";
import { INDEX_SUFFIX, RECORDING_SUFFIX, startUsOf } from "./file-names.ts";

export interface RotationOptions {
  /** A file is closed when it is larger, or spans more time. */
  readonly fileBytes?: number;
  readonly fileS?: number;
  /** Older files are deleted, and the oldest while all of a feed's are larger than this together. */
  readonly keepS?: number;
  readonly keepBytes?: number;
}

export const usualRotation = { fileBytes: 64 * 1024 * 1024, fileS: 3600, keepS: 7 * 86_400, keepBytes: 20 * 1024 ** 3 };
const BATCH_BYTES = 16 * 1024;
/** What may wait for a slow disk; beyond it frames are left out and counted. */
const WAITING_BYTES = 8 * 1024 * 1024;
const INDEX_EVERY_US = 1e6;

export class FeedRecorder {
  readonly folder: string;
  readonly #rotation: Required<RotationOptions>;
  readonly #onTrouble: (words: string) => void;
  readonly #isHeld: (fileEndUs: number) => boolean;
  /** Frames that are not in the recording. */
  leftOut = 0;
  #configuration: Buffer[] = [];
  /** What the present file's configuration says, without its time. */
  #said = "";
  #timeBase = 1_000_000;
  #file: { data: WriteStream; index: WriteStream; startUs: number; bytes: number; indexedUs: number } | undefined;
  #batch = Buffer.alloc(BATCH_BYTES);
  #batched = 0;
  #hasFailed = false;
  #closing: Promise<unknown>[] = [];

  /**
   * @param isHeld  whether a file that ends then must not be deleted yet
   * @throws RecordingError when the folder cannot be made
   */
  constructor(
    folder: string,
    rotation: Required<RotationOptions>,
    onTrouble: (words: string) => void,
    isHeld: (fileEndUs: number) => boolean,
  ) {
    this.folder = folder;
    this.#rotation = rotation;
    this.#onTrouble = onTrouble;
    this.#isHeld = isHeld;
    makeRecordingFolder(folder);
  }

  /** A whole frame as received; its bytes are copied. */
  write(bytes: Uint8Array, at: number, size: number): void {
    const type = typeOf(bytes[at + 1]!);
    if (type === "configuration-2" || type === "configuration-3") this.#configure(type, bytes, at, size);
    else if (type === "data") this.#data(bytes, at, size);
  }

  /** Hands what is batched to the system; call about once a second. */
  flush(): void {
    if (this.#batched === 0 || !this.#file) return;
    this.#file.data.write(Buffer.from(this.#batch.subarray(0, this.#batched)));
    this.#batched = 0;
  }

  /** Resolves when all that was written so far can be read. */
  settle(): Promise<void> {
    this.flush();
    const { data, index } = this.#file ?? {};
    const written = (stream: WriteStream | undefined) =>
      !stream || stream.destroyed || this.#hasFailed
        ? Promise.resolve()
        : new Promise<void>((done) => void stream.write(Buffer.alloc(0), () => done()));
    return Promise.all([written(data), written(index), ...this.#closing]).then(() => undefined);
  }

  async close(): Promise<void> {
    this.#end();
    await Promise.all(this.#closing);
  }

  #configure(type: string, bytes: Uint8Array, at: number, size: number): void {
    const frame = Buffer.from(bytes.subarray(at, at + size));
    const piece = type === "configuration-3" ? frame.readUInt16BE(14) : 0;
    if (piece === 0 || piece === 1) this.#configuration = [];
    this.#configuration.push(frame);
    this.#timeBase = type === "configuration-2" || piece <= 1 ? this.#timeBaseOf(type, frame) : this.#timeBase;
    const isWhole = piece === 0 || piece === 0xffff;
    if (!isWhole) return;
    const said = this.#configuration.map((f) => f.toString("latin1", 14, f.length - 2)).join();
    if (said !== this.#said) this.#end();
    this.#said = said;
  }

  #timeBaseOf(type: string, frame: Buffer): number {
    return frame.readUInt32BE(type === "configuration-3" ? 16 : 14) & 0xff_ffff || 1;
  }

  #data(bytes: Uint8Array, at: number, size: number): void {
    if (this.#configuration.length === 0) return;
    const word = (from: number) =>
      bytes[at + from]! * 0x100_0000 + ((bytes[at + from + 1]! << 16) | (bytes[at + from + 2]! << 8) | bytes[at + from + 3]!);
    const timeUs = timeUsOf(word(6), word(10), this.#timeBase);
    const file = this.#file;
    if (file && (file.bytes + size > this.#rotation.fileBytes || timeUs - file.startUs >= this.#rotation.fileS * 1e6))
      this.#end();
    if (!this.#file) this.#begin(timeUs);
    const open = this.#file!;
    if (this.#hasFailed || open.data.writableLength > WAITING_BYTES) {
      if (this.leftOut++ === 0 && !this.#hasFailed)
        this.#onTrouble(`${this.folder}: the disk cannot follow, frames are left out of the recording`);
      return;
    }
    if (timeUs - open.indexedUs >= INDEX_EVERY_US) {
      const pair = Buffer.alloc(16);
      pair.writeDoubleLE(timeUs, 0);
      pair.writeDoubleLE(open.bytes, 8);
      open.index.write(pair);
      open.indexedUs = timeUs;
    }
    this.#append(bytes, at, size);
  }

  #append(bytes: Uint8Array, at: number, size: number): void {
    if (this.#batched + size > this.#batch.length) this.flush();
    this.#file!.bytes += size;
    if (size > this.#batch.length) this.#file!.data.write(Buffer.from(bytes.subarray(at, at + size)));
    else {
      this.#batch.set(bytes.subarray(at, at + size), this.#batched);
      this.#batched += size;
    }
  }

  #begin(timeUs: number): void {
    this.#hasFailed = false;
    const path = join(this.folder, String(timeUs).padStart(16, "0"));
    const open = (name: string) => {
      // A restart within one frame's time finds the file there: both go into it, and readers find the frames again behind a torn one.
      const stream = createWriteStream(name, { flags: "a" });
      stream.on("error", (error) => {
        if (!this.#hasFailed)
          this.#onTrouble(`${name}: cannot be written, nothing more is recorded in this file: ${error.message}`);
        this.#hasFailed = true;
      });
      return stream;
    };
    const bytes = sizeOf(path + RECORDING_SUFFIX);
    const data = open(path + RECORDING_SUFFIX);
    this.#file = { data, index: open(path + INDEX_SUFFIX), startUs: timeUs, bytes, indexedUs: Number.NEGATIVE_INFINITY };
    for (const frame of this.#configuration) this.#append(frame, 0, frame.length);
    this.#deleteOld(timeUs);
  }

  #end(): void {
    this.flush();
    const file = this.#file;
    this.#file = undefined;
    if (!file) return;
    for (const stream of [file.data, file.index]) {
      const closed = new Promise<void>((done) => {
        stream.once("close", () => done());
        if (stream.closed) done();
        else stream.end();
      }).then(() => {
        this.#closing = this.#closing.filter((one) => one !== closed);
      });
      this.#closing.push(closed);
    }
  }

  #deleteOld(nowUs: number): void {
    try {
      const names = readdirSync(this.folder)
        .filter((name) => name.endsWith(RECORDING_SUFFIX))
        .sort();
      const sizes = names.map((name) => sizeOf(join(this.folder, name)));
      let total = sizes.reduce((sum, size) => sum + size, 0);
      for (const [k, name] of names.slice(0, -1).entries()) {
        const endUs = startUsOf(names[k + 1]!);
        const isOld = endUs < nowUs - this.#rotation.keepS * 1e6 || total > this.#rotation.keepBytes;
        if (!isOld || this.#isHeld(endUs)) return;
        total -= sizes[k]!;
        for (const suffix of [RECORDING_SUFFIX, INDEX_SUFFIX])
          rmSync(join(this.folder, name.slice(0, -RECORDING_SUFFIX.length) + suffix), { force: true });
      }
    } catch (error) {
      this.#onTrouble(`${this.folder}: old recordings cannot be deleted: ${(error as Error).message}`);
    }
  }
}

function sizeOf(path: string): number {
  try {
    return statSync(path).size;
  } catch {
    return 0; // not there yet; opening it tells when it cannot be
  }
}
