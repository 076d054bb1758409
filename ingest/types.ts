/** What ingest hands to the other stages. Types only: the pipeline may import this file and nothing else of ingest. */

export interface PhasorColumn {
  readonly unitIdCode: number;
  readonly unitName: string;
  /** As in the configuration frame, trailing blanks removed. */
  readonly name: string;
  readonly kind: "voltage" | "current";
  /** Position among this unit's phasors, from 0. */
  readonly indexInUnit: number;
}

export interface UnitInfo {
  readonly idCode: number;
  readonly name: string;
  readonly nominalHz: 50 | 60;
}

/**
 * One stream's recent frames as a structure of arrays. Rows are addressed by **slot**: the number of reporting periods since 1970 UTC,
 * `slot = round(timeUs / periodUs)`. A slot's row is fixed (`slot mod capacity`), so a late frame falls into its own place, and a frame
 * that never came leaves a gap that `rowOf` reports; nothing is filled in.
 *
 * A ring lives as long as one configuration frame is valid; when the configuration changes, blocks refer to a new ring.
 */
export interface FrameRing {
  readonly feedId: string;
  readonly columns: readonly PhasorColumn[];
  readonly units: readonly UnitInfo[];
  readonly periodUs: number;
  /** Rows held; a power of two. */
  readonly capacity: number;
  /** [capacity] the tag's time, µs since 1970 UTC. */
  readonly timeUs: Float64Array;
  /** [capacity] when the frame arrived here, µs since 1970 UTC (replayed recordings: equal to the tag's time). */
  readonly arrivedUs: Float64Array;
  /** [capacity × columns × (re, im)] rms, volt and ampere as the stream scales them; NaN where the unit marks the value as absent. */
  readonly phasors: Float64Array;
  /** [capacity × units] */
  readonly frequencyHz: Float64Array;
  /** [capacity × units] */
  readonly rocofHzPerS: Float64Array;
  /** [capacity × units] STAT word as received. */
  readonly stat: Uint16Array;
  /** [capacity] FRACSEC's quality byte as received: clock error and leap-second flags, see `timeQualityOf`. */
  readonly timeQuality: Uint8Array;
  /** Highest slot that was ever written; -1 when empty. */
  readonly newestSlot: number;
  /** Row that holds the slot's frame, or -1 when that frame is missing or already overwritten. */
  rowOf(slot: number): number;
}

/** Frames of one feed that came together: one socket read, or one tick of a replay. Both slots belong to it; there may be gaps between. */
export interface FrameBlock {
  readonly feedId: string;
  readonly ring: FrameRing;
  readonly firstSlot: number;
  readonly lastSlot: number;
}

export const feedStates = ["connecting", "configuring", "live", "stale", "refused"] as const;
export type FeedState = (typeof feedStates)[number];

/** What is known of one feed's health now. */
export interface FeedHealth {
  readonly feedId: string;
  readonly state: FeedState;
  /** Why it is not live, in words for an operator: what was expected, what was found, what to do. When live: what works less well, mostly empty. */
  readonly reason: string;
  readonly frames: number;
  readonly missingFrames: number;
  /** Count by listed code, e.g. "bad-crc", "wrong-id-code". */
  readonly defects: Readonly<Record<string, number>>;
  /** Tag of the newest frame, µs since 1970 UTC; undefined before the first. */
  readonly newestTimeUs?: number;
  readonly newestArrivedUs?: number;
}
