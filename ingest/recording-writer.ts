/** A raw recording made by a program that waits for it: frames back to back as they go on the wire, the configuration frame first. */
import { createWriteStream, type WriteStream } from "node:fs";
import { join } from "node:path";
import { makeRecordingFolder, RecordingError } from "./recording-error.ts";

export const recordingName = (feedId: string): string => `${feedId}.frames`;

export class RecordingWriter {
  readonly #path: string;
  readonly #stream: WriteStream;
  #failure: Error | undefined;

  /**
   * Replaces an older recording.
   * @throws RecordingError when the folder cannot be made
   */
  constructor(folder: string, feedId: string) {
    this.#path = join(folder, recordingName(feedId));
    makeRecordingFolder(folder);
    this.#stream = createWriteStream(this.#path);
    this.#stream.on("error", (error) => {
      this.#failure = error;
    });
  }

  write(bytes: Uint8Array, at: number, size: number): void {
    if (!this.#failure) this.#stream.write(Buffer.from(bytes.subarray(at, at + size)));
  }

  /** @throws RecordingError when the recording is not whole because the file could not be written */
  async close(): Promise<void> {
    if (!this.#stream.destroyed) await new Promise<void>((done) => this.#stream.end(() => done()).once("error", () => done()));
    if (this.#failure) throw new RecordingError("unwritable", `${this.#path}: ${this.#failure.message}`, this.#failure);
  }
}
