export { DisturbanceTracker, type TrackerProblem } from "./disturbance-tracker.ts";
export { watchDisturbances } from "./watch-disturbances.ts";
