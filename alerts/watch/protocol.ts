/** What the watch server and its page say to each other: JSON texts over one WebSocket. Types only; the page compiles against this file too. */
import type { FeedHealth } from "../../ingest/types.ts";
import type { Location } from "../../pipeline/types.ts";

export interface WatchedLine {
  readonly id: string;
  readonly name: string;
  readonly nominalKv: number;
  readonly lengthKm: number;
  /** In order; `feedId` undefined where nothing is measured. */
  readonly ends: readonly { readonly stationId: string; readonly stationName: string; readonly feedId?: string }[];
  /** Every how many km a tower stands, on average; for drawing ticks. 0 without a list. */
  readonly spanKm: number;
}

export interface WatchedNetwork {
  readonly name: string;
  readonly frequencyHz: number;
  readonly timeZone: string;
  /** Minutes ahead of UTC now. */
  readonly offsetMinutes: number;
  readonly lines: readonly WatchedLine[];
}

export interface HistoryLine {
  readonly atUs: number;
  readonly head: string;
  readonly text: string;
}

/** An incident as the page shows it. */
export interface WatchedIncident {
  readonly incident: string;
  readonly revision: number;
  readonly stage: "noticed" | "provisional" | "refined" | "settled" | "outside";
  readonly lineId: string | null;
  readonly onsetUs: number;
  readonly clearedUs: number | null;
  readonly text: string;
  readonly readOut: string;
  /** "A to ground" */
  readonly phases: string | null;
  readonly location: Location | null;
  readonly isEnded: boolean;
  readonly acknowledged: { readonly by: string; readonly atUs: number } | null;
  readonly history: readonly HistoryLine[];
}

export type FeedView = FeedHealth;

export type ToPage =
  | {
      readonly kind: "hello";
      readonly serverTimeUs: number;
      readonly network: WatchedNetwork;
      readonly incidents: readonly WatchedIncident[];
      readonly feeds: readonly FeedView[];
      readonly caution: string;
      readonly cautionBlock: string;
    }
  | { readonly kind: "incident"; readonly serverTimeUs: number; readonly incident: WatchedIncident }
  | { readonly kind: "pulse"; readonly serverTimeUs: number; readonly feeds: readonly FeedView[]; readonly undelivered: number }
  | { readonly kind: "refused"; readonly reason: string };

export type ToServer = { readonly kind: "acknowledge"; readonly incident: string; readonly by: string };
