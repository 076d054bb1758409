/** A fault record (IEEE C37.111, "COMTRADE") in memory, and what can be wrong with one. */

export interface AnalogChannel {
  readonly name: string;
  /** As written, e.g. "A"; may be empty. */
  readonly phase: string;
  /** Circuit component being monitored, as written. */
  readonly circuit: string;
  /** e.g. "kV", "A"; as written. */
  readonly unit: string;
  readonly primary: number;
  readonly secondary: number;
  /** Whether `values` are on the primary or the secondary side of the instrument transformer. */
  readonly side: "primary" | "secondary";
  /** Time skew within the sampling interval [µs]. */
  readonly skewUs: number;
  /** [samples] in `unit`; NaN where the file marks the value as missing. */
  readonly values: Float64Array;
}

export interface DigitalChannel {
  readonly name: string;
  readonly normalState: 0 | 1;
  /** [samples] */
  readonly values: Uint8Array;
}

export const dataFormats = ["ASCII", "BINARY", "BINARY32", "FLOAT32"] as const;
export type DataFormat = (typeof dataFormats)[number];

export interface FaultRecord {
  readonly station: string;
  readonly device: string;
  readonly revision: 1999 | 2013;
  readonly nominalHz: number;
  /** Time of the first sample, and of the trigger [µs since 1970 UTC]. A 1999 record states no zone: `utcOffsetMinutes` is then what the reader was given. */
  readonly startUs: number;
  readonly triggerUs: number;
  readonly utcOffsetMinutes: number;
  /** [samples] seconds from the first sample. */
  readonly timesS: Float64Array;
  /** Sampling rates in order, each up to and with sample number `lastSample` (from 1); empty when only time stamps say. */
  readonly rates: readonly { readonly hz: number; readonly lastSample: number }[];
  readonly analogs: readonly AnalogChannel[];
  readonly digitals: readonly DigitalChannel[];
  /** What is odd but could be read, in words: gaps in the numbering, missing values. */
  readonly oddities: readonly string[];
}

export const recordErrorCodes = [
  "no-such-file",
  "too-large",
  "not-a-record",
  "unknown-revision",
  "bad-field",
  "too-few-lines",
  "channel-count",
  "unknown-format",
  "truncated",
  "sample-count",
  "time-order",
] as const;
export type RecordErrorCode = (typeof recordErrorCodes)[number];

/** A record that cannot be read: what was expected, what was found, where, what to do. */
export class RecordError extends Error {
  readonly code: RecordErrorCode;
  readonly where: string;
  constructor(
    code: RecordErrorCode,
    detail: { expected: string; found: string; where: string; whatToDo?: string; cause?: unknown },
  ) {
    super(
      `${detail.where}: expected ${detail.expected}, found ${detail.found}${detail.whatToDo ? `. ${detail.whatToDo}` : ""}`,
      detail.cause === undefined ? undefined : { cause: detail.cause },
    );
    this.name = "RecordError";
    this.code = code;
    this.where = detail.where;
  }
}
