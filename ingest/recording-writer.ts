/** A raw recording: frames back to back as they came on the wire, the configuration frame first. */
import { createWriteStream, mkdirSync, type WriteStream } from "node:fs";
import { join } from "node:path";
import { RecordingError } from "./recording-error.ts";

/** What may wait for a slow disk while a live feed goes on; beyond it frames are left out of the recording and counted, never held. */
const WAITING_BYTES = 8 * 1024 * 1024;

export const recordingName = (feedId: string): string => `${feedId}.frames`;

export class RecordingWriter {
  readonly #path: string;
  readonly #stream: WriteStream;
  readonly #mayLeaveOut: boolean;
  readonly #onTrouble: (words: string) => void;
  #failure: Error | undefined;
  /** Frames that are not in the recording. */
  leftOut = 0;

  /**
   * @param how  "append": a live feed's; goes on behind an older recording, and leaves frames out when the disk cannot follow.
   *             "replace": made by a program that waits for `close`; nothing is left out.
   * @param onTrouble  called when the file cannot be written, and at the first frame that is left out
   * @throws RecordingError when the folder cannot be made
   */
  constructor(
    folder: string,
    feedId: string,
    how: "append" | "replace" = "append",
    onTrouble: (words: string) => void = () => {},
  ) {
    this.#path = join(folder, recordingName(feedId));
    this.#mayLeaveOut = how === "append";
    this.#onTrouble = onTrouble;
    try {
      mkdirSync(folder, { recursive: true });
    } catch (cause) {
      throw new RecordingError("unwritable", `${folder}: cannot be made: ${(cause as Error).message}`, cause);
    }
    this.#stream = createWriteStream(this.#path, { flags: how === "append" ? "a" : "w" });
    this.#stream.on("error", (error) => {
      this.#failure = error;
      this.#onTrouble(`${this.#path}: cannot be written, nothing more is recorded: ${error.message}`);
    });
  }

  write(bytes: Uint8Array, at: number, size: number): void {
    const isFull = this.#mayLeaveOut && this.#stream.writableLength > WAITING_BYTES;
    if (!isFull && !this.#failure) {
      this.#stream.write(Buffer.from(bytes.subarray(at, at + size)));
      return;
    }
    if (this.leftOut++ === 0 && isFull)
      this.#onTrouble(`${this.#path}: the disk cannot follow, frames are left out of the recording`);
  }

  /** @throws RecordingError when the recording is not whole because the file could not be written */
  async close(): Promise<void> {
    if (!this.#stream.destroyed) await new Promise<void>((done) => this.#stream.end(() => done()).once("error", () => done()));
    if (this.#failure) throw new RecordingError("unwritable", `${this.#path}: ${this.#failure.message}`, this.#failure);
  }
}
