import {
  concat,
  connect,
  defer,
  EMPTY,
  endWith,
  ignoreElements,
  interval,
  merge,
  mergeMap,
  type OperatorFunction,
  type SchedulerLike,
  takeUntil,
} from "rxjs";
import type { Network } from "../config/index.ts";
import type { FrameBlock } from "../ingest/types.ts";
import { DisturbanceTracker, type TrackerProblem } from "./disturbance-tracker.ts";
import type { DisturbanceEvent } from "./types.ts";

export interface WatchOptions {
  /** Live: its time stands in when every feed has stopped. Without it (recordings) only the frames' own time counts. */
  readonly clock?: SchedulerLike;
  readonly onProblem?: (problem: TrackerProblem) => void;
}

const TICK_MS = 250;
/** A frame may be this old when it arrives; only later does silence count. */
const FEED_DELAY_MS = 2_000;

/**
 * Blocks of frames in, disturbances out. Holds the detectors' state, the captures of open disturbances and, with a clock, one timer. Ends with the
 * source, after settling what is open; drops nothing.
 */
export function watchDisturbances(
  network: Network,
  { clock, onProblem }: WatchOptions = {},
): OperatorFunction<FrameBlock, DisturbanceEvent> {
  return (source) =>
    defer(() => {
      const tracker = new DisturbanceTracker(network, onProblem);
      const ticks = clock
        ? interval(TICK_MS, clock).pipe(mergeMap(() => tracker.tick((clock.now() - FEED_DELAY_MS) * 1000)))
        : EMPTY;
      const live = source.pipe(
        connect((blocks) =>
          merge(
            blocks.pipe(mergeMap((block) => tracker.step(block))),
            ticks.pipe(takeUntil(blocks.pipe(ignoreElements(), endWith(true)))),
          ),
        ),
      );
      return concat(
        live,
        defer(() => tracker.finish()),
      );
    });
}
