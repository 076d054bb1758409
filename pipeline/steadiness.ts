/**
 * Reads off a capture how the disturbance goes: how far each frame is from the undisturbed one, and whether the phasors have come to rest again,
 * which they do once no window touches a change any more.
 */
import type { TerminalCapture } from "./capture.ts";
import { NUMBERS_PER_ROW } from "./terminal-view.ts";

/** Change from one frame to the next, relative to the largest excursion, that counts as rest: above the decaying offset's ripple in a P class unit. */
const REST_CHANGE = 0.02;
const REST_FRAMES = 3;

export interface Progress {
  /** [frames] largest distance of a phase current from its undisturbed value [A]. */
  readonly excursionAmp: Float64Array;
  /** [frames] change of the currents since the frame before [A]. */
  readonly changeAmp: Float64Array;
  readonly peakAmp: number;
  /** Index of the first frame of the present rest, when the newest frames are at rest after the peak. */
  readonly restsSince: number | undefined;
}

/** @param onsetS  stamp of the first disturbed frame, seconds from the epoch */
export function progressOf(capture: TerminalCapture, onsetS: number): Progress {
  const { timesS, phasors, deltaHz } = capture;
  const frames = timesS.length;
  const excursionAmp = new Float64Array(frames);
  const changeAmp = new Float64Array(frames);
  const before = lastBefore(timesS, onsetS - 2 * capture.periodS);
  let peakAmp = 0;
  for (let n = 0; n < frames; n++) {
    excursionAmp[n] = distance(phasors, n, before, 2 * Math.PI * deltaHz * (timesS[n]! - timesS[before]!));
    changeAmp[n] = n === 0 ? 0 : distance(phasors, n, n - 1, 2 * Math.PI * deltaHz * (timesS[n]! - timesS[n - 1]!));
    peakAmp = Math.max(peakAmp, excursionAmp[n]!);
  }
  let calm = 0;
  while (calm < frames && changeAmp[frames - 1 - calm]! < REST_CHANGE * peakAmp && timesS[frames - 1 - calm]! > onsetS) calm++;
  return { excursionAmp, changeAmp, peakAmp, restsSince: calm >= REST_FRAMES ? frames - calm : undefined };
}

function lastBefore(timesS: Float64Array, limitS: number): number {
  let n = 0;
  while (n + 1 < timesS.length && timesS[n + 1]! < limitS) n++;
  return n;
}

/** Largest distance of the three phase currents of frame n from those of frame k turned by `turnRad`. */
function distance(phasors: Float64Array, n: number, k: number, turnRad: number): number {
  const cos = Math.cos(turnRad);
  const sin = Math.sin(turnRad);
  let largest = 0;
  for (let c = 6; c < NUMBERS_PER_ROW; c += 2) {
    const re = phasors[k * NUMBERS_PER_ROW + c]!;
    const im = phasors[k * NUMBERS_PER_ROW + c + 1]!;
    largest = Math.max(
      largest,
      Math.hypot(
        phasors[n * NUMBERS_PER_ROW + c]! - (re * cos - im * sin),
        phasors[n * NUMBERS_PER_ROW + c + 1]! - (re * sin + im * cos),
      ),
    );
  }
  return largest;
}
