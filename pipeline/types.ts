/** What the pipeline tells the stages after it. Types only: alerts may import this file and nothing else of the pipeline. */

export const faultTypes = ["AG", "BG", "CG", "AB", "BC", "CA", "ABG", "BCG", "CAG", "ABC"] as const;
export type FaultType = (typeof faultTypes)[number];

export type LocateStage = "provisional" | "refined" | "settled";

export const flags = ["firm", "fair", "rough", "direction only"] as const;
export type Flag = (typeof flags)[number];

/** One method's answer. Estimates with the same `witness` rest on the same frames and are not independent. */
export interface Estimate {
  /** Published name, e.g. "Takagi", "two-ended negative sequence". */
  readonly method: string;
  /** Station ids whose measurements it uses. */
  readonly terminals: readonly string[];
  /** From the line's first terminal; may lie outside the line. */
  readonly km: number;
  readonly sdKm: number;
  /** Share in the joint density, 0..1; 0 when the method was shown but not used. */
  readonly weight: number;
  readonly witness: string;
  /** Which frames: "whole window in the fault", "unmixed", "mid-fault frame". */
  readonly frames: string;
  readonly resistanceOhm?: number;
}

export interface TowerSpan {
  readonly from: string;
  readonly to: string;
}

/** One piece of the stretch: [low, high] km from the first terminal, the chance it holds (0..1), and its towers. */
export interface Piece {
  readonly lowKm: number;
  readonly highKm: number;
  readonly chance: number;
  readonly towers?: TowerSpan;
}

/** Where, how sure, and why. All km count from the line's first terminal. */
export interface Location {
  readonly lineId: string;
  readonly phases: FaultType;
  /** Mode of the joint density; null for "direction only". */
  readonly km: number | null;
  readonly spanTowers?: TowerSpan;
  /** Smallest part of the line that holds 90% of the chance, in one or two pieces, likelier first; empty for "direction only". */
  readonly pieces: readonly Piece[];
  /** Hull of the pieces: [low, high]. */
  readonly stretchKm: readonly [number, number] | null;
  readonly flag: Flag;
  /** Plain words: what supports the flag, what weakens it, what changed since the last stage. */
  readonly reasons: readonly string[];
  readonly resistanceOhm: number | null;
  readonly estimates: readonly Estimate[];
  /** Joint density on equal steps over the line, for drawing: chance per km. */
  readonly density: { readonly stepKm: number; readonly perKm: readonly number[] };
}

interface EventBase {
  /** Same for all events of one disturbance; derived from its onset, so that a replay gives the same id. */
  readonly disturbanceId: string;
  /** Time of the newest frame that this event rests on, µs since 1970 UTC. */
  readonly dataTimeUs: number;
}

/** A disturbance began. `lineIds`: lines of which a terminal saw it, strongest first. */
export interface OnsetNoticed extends EventBase {
  readonly kind: "noticed";
  readonly onsetUs: number;
  readonly lineIds: readonly string[];
  /** Terminal ids. */
  readonly seenBy: readonly string[];
}

export interface FaultLocated extends EventBase {
  readonly kind: "located";
  readonly stage: LocateStage;
  readonly onsetUs: number;
  /** End of the fault current as fitted, all poles; null while it lasts or when it was not seen. */
  readonly clearedUs: number | null;
  readonly location: Location;
}

/** The fault current ended. `noCurrentAt`: station ids where all faulted poles carry no current now (measured, not inferred). */
export interface FaultCleared extends EventBase {
  readonly kind: "cleared";
  readonly lineId: string;
  readonly clearedUs: number;
  readonly noCurrentAt: readonly string[];
}

/** Seen, but not a fault on a monitored line. */
export interface FoundOutside extends EventBase {
  readonly kind: "outside";
  readonly onsetUs: number;
  /** In words: "behind Brack", "not a fault: load step". */
  readonly reason: string;
}

/** Nothing more will come for this disturbance. */
export interface DisturbanceEnded extends EventBase {
  readonly kind: "ended";
}

export type DisturbanceEvent = OnsetNoticed | FaultLocated | FaultCleared | FoundOutside | DisturbanceEnded;
