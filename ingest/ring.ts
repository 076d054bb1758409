/** The rows of one stream: see `FrameRing` for what readers see. */
import type { DataPlan, StreamConfig } from "./c37118/index.ts";
import { decodeRowInto, LEAP_DELETE, LEAP_PENDING, planOf, timeUsOf } from "./c37118/index.ts";
import type { FrameRing, PhasorColumn, UnitInfo } from "./types.ts";

/** At least this much is kept, in a power of two of rows. */
const KEPT_S = 16;
/** A tag further from the newest than this is believed only when the next frame agrees. */
const JUMP_US = 10e6;
const DAY_S = 86_400;

/** Looked at before memory is taken: a broken configuration frame may claim anything. The widest stream that a configuration 2 can describe, some 3,200 phasors, needs a fifth of it at 60 frames/s. */
const LARGEST_RING_BYTES = 256e6;
/** Far above what units send (120 frames/s in the standard's tables, from memory). */
const HIGHEST_RATE_HZ = 1000;

const rowsFor = (config: StreamConfig): number => 2 ** Math.ceil(Math.log2(Math.max(64, KEPT_S * config.reportingRateHz)));

/** Why no ring is made for such a stream, in words; undefined when one can be. */
export function ringProblem(config: StreamConfig): string | undefined {
  const { reportingRateHz, units } = config;
  if (reportingRateHz > HIGHEST_RATE_HZ) return `${reportingRateHz} frames/s; at most ${HIGHEST_RATE_HZ} are read`;
  const bytes = rowsFor(config) * (25 + units.reduce((sum, unit) => sum + 16 * unit.phasors.length + 18, 0));
  if (bytes > LARGEST_RING_BYTES)
    return `its last ${KEPT_S} s need ${Math.round(bytes / 1e6)} MB, at most ${LARGEST_RING_BYTES / 1e6} are given: split the stream`;
  return undefined;
}

export type Placement = "new" | "duplicate" | "too-late" | "doubtful-time" | "leap-second";

export class WritableRing implements FrameRing {
  readonly feedId: string;
  readonly columns: readonly PhasorColumn[];
  readonly units: readonly UnitInfo[];
  readonly periodUs: number;
  readonly capacity: number;
  readonly timeUs: Float64Array;
  readonly arrivedUs: Float64Array;
  readonly phasors: Float64Array;
  readonly frequencyHz: Float64Array;
  readonly rocofHzPerS: Float64Array;
  readonly stat: Uint16Array;
  readonly timeQuality: Uint8Array;
  readonly plan: DataPlan;
  #isAfterLeap = false;
  newestSlot = -1;
  /** Slot that the last `put` wrote or found. */
  lastSlot = -1;
  readonly #slotOfRow: Float64Array;
  #doubtfulUs = Number.NaN;

  constructor(feedId: string, config: StreamConfig) {
    this.feedId = feedId;
    this.columns = config.units.flatMap((unit) =>
      unit.phasors.map((phasor, indexInUnit) => ({
        unitIdCode: unit.idCode,
        unitName: unit.name,
        name: phasor.name,
        kind: phasor.kind,
        indexInUnit,
      })),
    );
    this.units = config.units.map(({ idCode, name, nominalHz }) => ({ idCode, name, nominalHz }));
    this.periodUs = 1e6 / config.reportingRateHz;
    this.capacity = rowsFor(config);
    const rows = this.capacity;
    this.timeUs = new Float64Array(rows);
    this.arrivedUs = new Float64Array(rows);
    this.phasors = new Float64Array(rows * this.columns.length * 2);
    this.frequencyHz = new Float64Array(rows * this.units.length);
    this.rocofHzPerS = new Float64Array(rows * this.units.length);
    this.stat = new Uint16Array(rows * this.units.length);
    this.timeQuality = new Uint8Array(rows);
    this.#slotOfRow = new Float64Array(rows).fill(-1);
    this.plan = planOf(config);
  }

  rowOf(slot: number): number {
    const row = slot % this.capacity; // slots pass 2³¹: no bit mask
    return this.#slotOfRow[row] === slot ? row : -1;
  }

  /** Decodes the frame at `at` into its place. A frame that came twice, or after its row went to a newer one, changes nothing. */
  put(view: DataView, at: number, arrivedUs: number | undefined): Placement {
    const timeUs = timeUsOf(view.getUint32(at + 6), view.getUint32(at + 10), this.plan.timeBase);
    const slot = Math.round(timeUs / this.periodUs);
    this.lastSlot = slot;
    if (this.newestSlot >= 0) {
      const aheadUs = timeUs - this.newestSlot * this.periodUs;
      if (Math.abs(aheadUs) > Math.max(JUMP_US, 4 * this.periodUs)) {
        const isAgreed = Math.abs(timeUs - this.#doubtfulUs) <= 2.5 * this.periodUs;
        this.#doubtfulUs = timeUs;
        if (!isAgreed) return "doubtful-time";
        this.#slotOfRow.fill(-1);
        this.newestSlot = -1;
      } else if (slot <= this.newestSlot - this.capacity) return "too-late";
    }
    this.#doubtfulUs = Number.NaN;
    const row = slot % this.capacity;
    const quality = view.getUint8(at + 10);
    if (this.#isLeap(quality, view.getUint32(at + 6), this.#slotOfRow[row] === slot)) return "leap-second";
    if (this.#slotOfRow[row] === slot) return "duplicate";
    decodeRowInto(this, row, this.plan, view, at);
    this.timeUs[row] = timeUs;
    this.timeQuality[row] = quality;
    this.arrivedUs[row] = arrivedUs ?? timeUs;
    this.#slotOfRow[row] = slot;
    if (slot > this.newestSlot) this.newestSlot = slot;
    return "new";
  }

  /**
   * SOC does not count leap seconds: 23:59:60 bears the number of the second after it or, in some units, of the one before. Slots are UTC, so that all
   * feeds agree; they have no place for that second's frames, which are left out, and so is the one frame that follows: readers then see a gap where
   * a second of the grid's life is not in the ring, and no phasor is compared across it. A deleted second is a gap as it is.
   */
  #isLeap(quality: number, socS: number, isTaken: boolean): boolean {
    const second = socS % DAY_S;
    if ((quality & LEAP_PENDING) !== 0 && (quality & LEAP_DELETE) === 0) {
      const isLeap = second === 0 || (second === DAY_S - 1 && isTaken);
      this.#isAfterLeap ||= isLeap;
      return isLeap;
    }
    const isFirstAfter = this.#isAfterLeap;
    this.#isAfterLeap = false;
    return isFirstAfter;
  }
}
