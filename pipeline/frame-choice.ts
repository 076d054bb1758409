/**
 * Turns one end's frames into the phasors before and in the fault: from frames whose whole window lies in the fault where there are any, else by
 * unmixing, or, before the clearing is known, from the frame that is deepest in the fault (good for two-ended methods only).
 */
import type { TerminalCapture } from "./capture.ts";
import { type Complex, complex } from "./complex.ts";
import type { EndPhasors } from "./evidence.ts";
import type { MeasuringWindow } from "./measuring-window.ts";
import { NUMBERS_PER_ROW } from "./terminal-view.ts";
import { PROFILE, prepareEnd, statesAt, type Timing } from "./unmix.ts";

/** How phasors came about, in words: from the states of the fit. */
export const UNMIXED = "unmixed";

const CHANNELS = 6;

/** Frame n turned back to the epoch. */
function atEpoch(capture: TerminalCapture, n: number): Complex[] {
  const turn = -2 * Math.PI * capture.deltaHz * capture.timesS[n]!;
  const cos = Math.cos(turn);
  const sin = Math.sin(turn);
  return Array.from({ length: CHANNELS }, (_, c) => {
    const re = capture.phasors[n * NUMBERS_PER_ROW + 2 * c]!;
    const im = capture.phasors[n * NUMBERS_PER_ROW + 2 * c + 1]!;
    return complex(re * cos - im * sin, re * sin + im * cos);
  });
}

/** Mean of frames and standard deviation of one frame's re (as im). */
function meanOf(frames: readonly Complex[][]): { mean: Complex[]; sd: number[] } {
  const n = frames.length;
  const mean = Array.from({ length: CHANNELS }, (_, c) =>
    complex(frames.reduce((s, f) => s + f[c]!.re, 0) / n, frames.reduce((s, f) => s + f[c]!.im, 0) / n),
  );
  const sd = mean.map((m, c) =>
    Math.sqrt(frames.reduce((s, f) => s + (f[c]!.re - m.re) ** 2 + (f[c]!.im - m.im) ** 2, 0) / Math.max(1, 2 * n - 2)),
  );
  return { mean, sd };
}

const indices = (capture: TerminalCapture, isWanted: (t: number) => boolean): number[] =>
  [...capture.timesS.keys()].filter((n) => isWanted(capture.timesS[n]!));

/** The last undisturbed frames, at most `PRE_FRAMES`. */
const PRE_FRAMES = 12;
function before(capture: TerminalCapture, limitS: number) {
  const frames = indices(capture, (t) => t <= limitS).slice(-PRE_FRAMES);
  return frames.length < 3
    ? undefined
    : { ...meanOf(frames.map((n) => atEpoch(capture, n))), count: frames.length, used: frames };
}

/**
 * Phasors from frames with their whole window in the fault; `undefined` when there are none.
 * @param isOnsetKnown  the timing is fitted: then the decaying offset, which follows from the onset, is taken out of the currents
 */
export function wholeWindowPhasors(
  capture: TerminalCapture,
  window: MeasuringWindow,
  timing: Timing,
  isOnsetKnown: boolean,
): EndPhasors | undefined {
  const pre = before(capture, timing.onsetS - window.halfS);
  const inside = indices(capture, (t) => t - window.halfS >= timing.onsetS && t + window.halfS <= timing.clearingS);
  if (!pre || inside.length === 0) return undefined;
  const frames = `${inside.length} frame${inside.length === 1 ? "" : "s"} with the whole window in the fault`;
  const fault = meanOf(inside.map((n) => atEpoch(capture, n)));
  // With few frames their own scatter says little: never less than what the undisturbed frames show.
  const leastSd = pre.sd.map((s) => s / Math.sqrt(inside.length));
  const preSd = pre.sd.map((s) => s / Math.sqrt(pre.count));
  if (!isOnsetKnown) {
    const faultSd = fault.sd.map((s, c) => Math.max(s / Math.sqrt(inside.length), leastSd[c]!));
    return { terminal: capture.terminal, pre: pre.mean, fault: fault.mean, preSd, faultSd, frames };
  }
  const used = [...pre.used, ...inside];
  const part = {
    timesS: Float64Array.from(used, (n) => capture.timesS[n]!),
    phasors: Float64Array.from(
      used.flatMap((n) => [...capture.phasors.subarray(n * NUMBERS_PER_ROW, (n + 1) * NUMBERS_PER_ROW)]),
    ),
    window,
    nominalHz: capture.nominalHz,
    deltaHz: capture.deltaHz,
  };
  const states = statesAt(
    prepareEnd(part, PROFILE.offsetS),
    { onsetS: timing.onsetS, clearingS: Number.POSITIVE_INFINITY },
    PROFILE,
  );
  return {
    terminal: capture.terminal,
    pre: states.pre,
    fault: states.fault,
    preSd,
    faultSd: states.faultSd.map((s, c) => Math.max(s, leastSd[c]!)),
    frames,
  };
}

/** The states of the unmixing fit. */
export function unmixedPhasors(
  capture: TerminalCapture,
  window: MeasuringWindow,
  timing: Timing,
): { end: EndPhasors; residual: number } {
  const states = statesAt(prepareEnd({ ...capture, window }, PROFILE.offsetS), timing, PROFILE);
  return {
    end: {
      terminal: capture.terminal,
      pre: states.pre,
      fault: states.fault,
      preSd: states.preSd,
      faultSd: states.faultSd,
      frames: UNMIXED,
    },
    residual: states.residual,
  };
}

/** Relative error that mixing may leave in the ratio of two ends' superimposed phasors of like windows: offset, staggered changes. */
const MIXED_ERROR = 0.004;

/** The frame at `atS`, deep in the fault but mixed with what was before. */
export function mixedFrame(
  capture: TerminalCapture,
  window: MeasuringWindow,
  firstDisturbedS: number,
  atS: number,
): EndPhasors | undefined {
  const pre = before(capture, Math.min(firstDisturbedS - 2 * capture.periodS, atS - window.halfS));
  const [n] = indices(capture, (t) => Math.abs(t - atS) < 1e-4);
  if (!pre || n === undefined) return undefined;
  const fault = atEpoch(capture, n);
  return {
    terminal: capture.terminal,
    pre: pre.mean,
    fault,
    preSd: pre.sd.map((s) => s / Math.sqrt(pre.count)),
    faultSd: fault.map((x, c) =>
      Math.hypot(pre.sd[c]!, MIXED_ERROR * Math.hypot(x.re - pre.mean[c]!.re, x.im - pre.mean[c]!.im)),
    ),
    frames: "mid-fault frame",
  };
}
