export { DisturbanceTracker } from "./disturbance-tracker.ts";
export type { DisturbanceEvent } from "./types.ts";
export { watchDisturbances } from "./watch-disturbances.ts";
