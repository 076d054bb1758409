/** What every frame starts with. Source: IEEE C37.118.2-2011, clause 6.2, tables 2 to 4 (from memory). */
import { bits, fields, u16, u32 } from "./fields.ts";

export const frameHeader = fields([
  ["sync", u16],
  ["frameSizeBytes", u16],
  ["idCode", u16],
  ["socS", u32],
  ["fracSec", u32],
]);

export const SYNC_BYTE = 0xaa;
/** Header and CRC: no frame is shorter. */
export const SMALLEST_FRAME_BYTES = frameHeader.size + 2;
export const LARGEST_FRAME_BYTES = 65_535;

/** Bits 4-6 of the second byte. */
export const frameTypes = ["data", "header", "configuration-1", "configuration-2", "command", "configuration-3"] as const;
export type FrameType = (typeof frameTypes)[number];

/** Second byte: type, and version of the standard (1: 2005, 2: 2011). */
export const syncWord = (type: FrameType, version: 1 | 2 = type === "configuration-3" ? 2 : 1): number =>
  (SYNC_BYTE << 8) | (frameTypes.indexOf(type) << 4) | version;

/** Undefined for a reserved type. */
export const typeOf = (secondByte: number): FrameType | undefined =>
  (secondByte & 0x80) === 0 ? frameTypes[(secondByte >> 4) & 7] : undefined;

/** STAT: clause 6.3, table 7 (from memory), [lowest bit, width]. */
export const statWord = bits({
  dataError: [14, 2],
  notSynchronised: [13, 1],
  sortedByArrival: [12, 1],
  trigger: [11, 1],
  configurationChange: [10, 1],
  modified: [9, 1],
  timeQuality: [6, 3],
  unlockedTime: [4, 2],
  triggerReason: [0, 4],
});

/** High byte of FRACSEC: clause 6.2.2, tables 3 and 4 (from memory), [lowest bit, width]. */
const timeQualityByte = bits({ leapDelete: [6, 1], leapOccurred: [5, 1], leapPending: [4, 1], code: [0, 4] });
export const LEAP_PENDING = timeQualityByte.write({ leapPending: 1 });
export const LEAP_DELETE = timeQualityByte.write({ leapDelete: 1 });

export interface TimeQuality {
  readonly leapSecond: "none" | "pending" | "occurred";
  /** Meaningful with a leap second only. */
  readonly leapDirection: "added" | "deleted";
  /** Bound of the clock's error [µs]: 0 when locked, Infinity when the clock failed or the code is reserved. */
  readonly errorUs: number;
}

export function timeQualityOf(byte: number): TimeQuality {
  const { leapDelete, leapOccurred, leapPending, code } = timeQualityByte.read(byte);
  return {
    leapSecond: leapPending ? "pending" : leapOccurred ? "occurred" : "none",
    leapDirection: leapDelete ? "deleted" : "added",
    // Code 1 is a nanosecond, each further one ten times as much, up to 10 s.
    errorUs: code === 0 ? 0 : code <= 11 ? 10 ** (code - 4) : Number.POSITIVE_INFINITY,
  };
}

/** SOC and FRACSEC as whole µs since 1970 UTC. */
export const timeUsOf = (socS: number, fracSec: number, timeBase: number): number =>
  socS * 1e6 + Math.round(((fracSec & 0xff_ffff) / timeBase) * 1e6);

/** SOC and FRACSEC of a time [µs since 1970 UTC]. */
export function timeFields(timeUs: number, timeBase: number, quality = 0): { socS: number; fracSec: number } {
  const socS = Math.floor(timeUs / 1e6);
  const count = Math.round(((timeUs - socS * 1e6) / 1e6) * timeBase);
  return count >= timeBase ? { socS: socS + 1, fracSec: quality * 2 ** 24 } : { socS, fracSec: quality * 2 ** 24 + count };
}
