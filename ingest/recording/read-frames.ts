/** Bytes of a feed's recording, whatever it is: one raw file, a folder of rotated ones, or a capture. */
import { closeSync, openSync, readdirSync, readSync, statSync } from "node:fs";
import { join } from "node:path";
import type { FrameDefect } from "../c37118/index.ts";
import { captureFrames, isCapture } from "../pcap/index.ts";
import { RecordingError } from "../recording-error.ts";
import { RECORDING_SUFFIX } from "./file-names.ts";

const CHUNK_BYTES = 64 * 1024;

export interface RecordingBytes {
  /** The next bytes in order; undefined at the end. */
  next(): Uint8Array | undefined;
  /** IDCODEs that a capture holds beside the wanted one. */
  readonly otherIdCodes: ReadonlySet<number>;
  close(): void;
}

/**
 * @param idCode  of a capture only this stream's frames are taken
 * @throws RecordingError when it cannot be read
 */
export function openRecording(
  path: string,
  idCode: number,
  onDefect: (code: FrameDefect, words: string) => void,
): RecordingBytes {
  const otherIdCodes = new Set<number>();
  let files: string[];
  try {
    files = statSync(path).isDirectory()
      ? readdirSync(path)
          .filter((name) => name.endsWith(RECORDING_SUFFIX))
          .sort()
          .map((name) => join(path, name))
      : [path];
    if (files.length === 0) throw new Error(`no file ending in ${RECORDING_SUFFIX} in this folder`);
    for (const name of files) closeSync(openSync(name, "r"));
  } catch (cause) {
    throw new RecordingError("unreadable", `${path}: cannot be read: ${(cause as Error).message}`, cause);
  }
  const bytes = (function* () {
    for (const name of files) {
      const file = openSync(name, "r");
      try {
        const start = Buffer.alloc(4);
        const got = readSync(file, start, 0, 4, 0);
        if (isCapture(start.subarray(0, got))) yield* wanted(captureFrames(file, onDefect), idCode, otherIdCodes);
        else yield* chunks(file);
      } finally {
        closeSync(file);
      }
    }
  })();
  return {
    otherIdCodes,
    next() {
      const step = bytes.next();
      return step.done ? undefined : step.value;
    },
    close: () => void bytes.return(undefined as never),
  };
}

function* wanted(frames: Iterable<Buffer>, idCode: number, others: Set<number>): Generator<Uint8Array> {
  for (const frame of frames) {
    const found = frame.readUInt16BE(4);
    if (found === idCode) yield frame;
    else others.add(found);
  }
}

export function* chunks(file: number, fromByte = 0): Generator<Uint8Array> {
  for (let at = fromByte; ; ) {
    const chunk = Buffer.alloc(CHUNK_BYTES);
    const got = readSync(file, chunk, 0, CHUNK_BYTES, at);
    if (got === 0) return;
    at += got;
    yield chunk.subarray(0, got);
  }
}
