/** A fault on the Marrow Coast as the pipeline tells it, for the tests of what people are told. */
import { demoNetworkPath, loadNetwork } from "../../config/index.ts";
import type { DisturbanceEvent, Location, OnsetNoticed } from "../../pipeline/types.ts";

export const network = loadNetwork(demoNetworkPath());
/** 2026-03-04 02:14:07.5 UTC */
export const ONSET_US = Date.UTC(2026, 2, 4, 2, 14, 7, 500) * 1000;

export const location = (over: Partial<Location> = {}): Location => ({
  lineId: "brack-tolva",
  phases: "AG",
  km: 41.27,
  spanTowers: { from: "118", to: "119" },
  pieces: [{ lowKm: 39.64, highKm: 42.98, chance: 0.9, towers: { from: "118", to: "121" } }],
  stretchKm: [39.64, 42.98],
  flag: "fair",
  reasons: ["both ends agree within 0.4 km", "unmixed"],
  resistanceOhm: 4.2,
  estimates: [
    {
      method: "two-ended negative sequence",
      terminals: ["brack", "tolva"],
      km: 41.3,
      sdKm: 0.4,
      weight: 1,
      witness: "both ends",
      frames: "unmixed",
    },
  ],
  density: { stepKm: 0.1482, perKm: Array.from({ length: 1000 }, (_, k) => Math.exp(-0.5 * ((k * 0.1482 - 41.3) / 1) ** 2)) },
  ...over,
});

const base = { disturbanceId: "d1", dataTimeUs: ONSET_US + 100_000 };
export const noticed: OnsetNoticed = {
  ...base,
  kind: "noticed",
  onsetUs: ONSET_US,
  lineIds: ["brack-tolva"],
  seenBy: ["brack-tolva/brack"],
};
export const located = (
  over: Partial<Location> = {},
  stage: "provisional" | "refined" | "settled" = "provisional",
  clearedUs: number | null = null,
): DisturbanceEvent => ({
  ...base,
  kind: "located",
  stage,
  onsetUs: ONSET_US,
  clearedUs,
  location: location(over),
});
export const cleared: DisturbanceEvent = {
  ...base,
  kind: "cleared",
  lineId: "brack-tolva",
  clearedUs: ONSET_US + 74_000,
  noCurrentAt: ["brack", "tolva"],
};
export const outside = (reason: string): DisturbanceEvent => ({ ...base, kind: "outside", onsetUs: ONSET_US, reason });
export const ended: DisturbanceEvent = { ...base, kind: "ended" };
export const wholeStory: readonly DisturbanceEvent[] = [
  noticed,
  located(),
  cleared,
  located({}, "refined", ONSET_US + 74_000),
  located({ flag: "firm" }, "settled", ONSET_US + 74_000),
  ended,
];
