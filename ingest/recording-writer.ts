/** A raw recording: frames back to back as they came on the wire, the configuration frame first. */
import { createWriteStream, mkdirSync, type WriteStream } from "node:fs";
import { join } from "node:path";

/** What may wait for a slow disk; beyond it frames are left out of the recording and counted, never held. */
const WAITING_BYTES = 8 * 1024 * 1024;

export const recordingName = (feedId: string): string => `${feedId}.frames`;

export class RecordingWriter {
  readonly #stream: WriteStream;
  leftOut = 0;

  /** By default appends when the file exists: a reconnected feed begins with its configuration again. */
  constructor(folder: string, feedId: string, how: "append" | "replace" = "append") {
    mkdirSync(folder, { recursive: true });
    this.#stream = createWriteStream(join(folder, recordingName(feedId)), { flags: how === "append" ? "a" : "w" });
    this.#stream.on("error", () => {
      this.leftOut++;
    });
  }

  write(bytes: Uint8Array, at: number, size: number): void {
    if (this.#stream.writableLength > WAITING_BYTES || this.#stream.destroyed) this.leftOut++;
    else this.#stream.write(Buffer.from(bytes.subarray(at, at + size)));
  }

  close(): Promise<void> {
    return new Promise((done) => {
      if (this.#stream.destroyed) done();
      else this.#stream.end(done);
    });
  }
}
