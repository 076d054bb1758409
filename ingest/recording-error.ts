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
