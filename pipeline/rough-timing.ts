/**
 * Where onset and clearing lie, to within a few milliseconds: every pair of times on a grid, the network as three steady states, windows as plain
 * step responses. With S(u) the window's step response every channel is  y[n] = a + b·S(t_n − t0) + c·S(t_n − t1),  linear in a, b, c; sums over
 * frames are made once per time, so that a pair costs a 3 × 3 solution.
 */
import { addKernelUpTo, kernelOf } from "./measuring-window.ts";
import type { PreparedEnd, Timing } from "./unmix.ts";

const CHANNELS = 6;
/** Shortest fault that protection and breakers allow: under a cycle and a half. Common practice, no source. */
const SHORTEST_S = 0.02;
/** A clearing must explain this much of what "still on" leaves, or noise would invent clearings. */
const CLEARING_EXPLAINS = 0.5;

interface Sums {
  /** Per grid time: Σ S. */
  readonly s1: Float64Array;
  /** [times × times] Σ S_i S_j */
  readonly ss: Float64Array;
  /** [times × 12] Σ S·y */
  readonly sy: Float64Array;
  /** [12] Σ y */
  readonly y: Float64Array;
  readonly yy: number;
  readonly frames: number;
}

/**
 * @param times      grid, seconds from the epoch, ascending
 * @param lastOnset  index of the latest time that may be the onset
 */
export function roughTiming(ends: readonly PreparedEnd[], times: readonly number[], lastOnset: number): Timing {
  const sums = ends.map((end) => sumsOf(end, times));
  let least = Number.POSITIVE_INFINITY;
  let best: Timing = { onsetS: times[0]!, clearingS: Number.POSITIVE_INFINITY };
  for (let i = 0; i <= lastOnset; i++) {
    const cost = sums.reduce((s, x) => s + costOf(x, [i]), 0);
    if (cost < least) {
      least = cost;
      best = { onsetS: times[i]!, clearingS: Number.POSITIVE_INFINITY };
    }
  }
  least *= CLEARING_EXPLAINS;
  for (let i = 0; i <= lastOnset; i++) {
    for (let j = i + 1; j < times.length; j++) {
      if (times[j]! - times[i]! < SHORTEST_S) continue;
      const cost = sums.reduce((s, x) => s + costOf(x, [i, j]), 0);
      if (cost < least) {
        least = cost;
        best = { onsetS: times[i]!, clearingS: times[j]! };
      }
    }
  }
  return best;
}

function sumsOf(end: PreparedEnd, times: readonly number[]): Sums {
  const { frames, timesS, phasors, scale, turns } = end;
  const kernel = kernelOf(end.window, 0, 0);
  const y = new Float64Array(frames * 12); // turned to the epoch, in channel scales
  for (let n = 0; n < frames; n++) {
    const cos = turns[n * 6]!;
    const sin = -turns[n * 6 + 1]!;
    for (let c = 0; c < CHANNELS; c++) {
      const at = n * 12 + 2 * c;
      y[at] = (phasors[at]! * cos - phasors[at + 1]! * sin) / scale[c]!;
      y[at + 1] = (phasors[at]! * sin + phasors[at + 1]! * cos) / scale[c]!;
    }
  }
  const count = times.length;
  const s = new Float64Array(count * frames);
  const out = {
    s1: new Float64Array(count),
    ss: new Float64Array(count * count),
    sy: new Float64Array(count * 12),
    y: new Float64Array(12),
  };
  const step = new Float64Array(2);
  for (let i = 0; i < count; i++) {
    for (let n = 0; n < frames; n++) {
      step[0] = 0;
      addKernelUpTo(kernel, timesS[n]! - times[i]!, 1, step, 0); // symmetric: S(t_n − t) is the share of the window after t
      s[i * frames + n] = step[0]!;
      out.s1[i] = out.s1[i]! + step[0]!;
      for (let c = 0; c < 12; c++) out.sy[i * 12 + c] = out.sy[i * 12 + c]! + step[0]! * y[n * 12 + c]!;
    }
    for (let j = 0; j <= i; j++) {
      let sum = 0;
      for (let n = 0; n < frames; n++) sum += s[i * frames + n]! * s[j * frames + n]!;
      out.ss[i * count + j] = sum;
      out.ss[j * count + i] = sum;
    }
  }
  let yy = 0;
  for (let k = 0; k < y.length; k++) {
    yy += y[k]! ** 2;
    out.y[k % 12] = out.y[k % 12]! + y[k]!;
  }
  return { ...out, yy, frames };
}

/** Summed squared residual after fitting a constant and one or two steps: Gram-Schmidt on the sums. */
function costOf(x: Sums, steps: readonly number[]): number {
  const count = x.s1.length;
  let cost = x.yy;
  for (let c = 0; c < 12; c++) cost -= x.y[c]! ** 2 / x.frames;
  const i = steps[0]!;
  const ii = x.ss[i * count + i]! - x.s1[i]! ** 2 / x.frames;
  if (ii < 1e-9) return cost;
  const j = steps[1];
  if (j === undefined) {
    for (let c = 0; c < 12; c++) cost -= (x.sy[i * 12 + c]! - (x.s1[i]! * x.y[c]!) / x.frames) ** 2 / ii;
    return cost;
  }
  const ij = x.ss[i * count + j]! - (x.s1[i]! * x.s1[j]!) / x.frames;
  const jj = x.ss[j * count + j]! - x.s1[j]! ** 2 / x.frames - ij ** 2 / ii;
  for (let c = 0; c < 12; c++) {
    const iy = x.sy[i * 12 + c]! - (x.s1[i]! * x.y[c]!) / x.frames;
    cost -= iy ** 2 / ii;
    if (jj > 1e-9) cost -= (x.sy[j * 12 + c]! - (x.s1[j]! * x.y[c]!) / x.frames - (ij * iy) / ii) ** 2 / jj;
  }
  return cost;
}
