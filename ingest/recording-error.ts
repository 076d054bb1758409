import { mkdirSync } from "node:fs";

export const recordingErrorCodes = [
  "unreadable",
  "unwritable",
  "unknown-feed",
  "no-configuration",
  "wrong-id-code",
  "unknown-channel",
] as const;
export type RecordingErrorCode = (typeof recordingErrorCodes)[number];

/** A recording that cannot be read or written, or does not fit the feed it is given for. */
export class RecordingError extends Error {
  readonly code: RecordingErrorCode;
  constructor(code: RecordingErrorCode, words: string, cause?: unknown) {
    super(words, cause === undefined ? undefined : { cause });
    this.name = "RecordingError";
    this.code = code;
  }
}

/** @throws RecordingError when the folder for recordings is not there and cannot be made */
export function makeRecordingFolder(folder: string): void {
  try {
    mkdirSync(folder, { recursive: true });
  } catch (cause) {
    throw new RecordingError("unwritable", `${folder}: cannot be made: ${(cause as Error).message}`, cause);
  }
}
