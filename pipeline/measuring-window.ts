/**
 * The measuring window of a unit: a frame is the samples, turned back by exp(−jω₀t), averaged with a fixed symmetric window and stamped with
 * its centre. What a frame shows of a signal that exists only part of the time follows from running sums of the window.
 */
import type { PmuClass } from "../config/index.ts";

export interface MeasuringWindow {
  /** Weights, symmetric, sum 1. */
  readonly taps: Float64Array;
  /** Interval of the taps [s]. */
  readonly stepS: number;
  /** Half of the support [s]: a frame sees nothing further from its stamp than this. */
  readonly halfS: number;
  /** Where it came from, for reasons in words. */
  readonly origin: string;
}

/**
 * M class, reporting rate -> [reference frequency F in Hz, order N] at 16 samples per cycle.
 * Source: IEEE C37.118.1-2011 annex C, table C.1 (kept as annex D of IEC/IEEE 60255-118-1); values from memory.
 */
const M_CLASS: Readonly<Record<50 | 60, Readonly<Record<number, readonly [number, number]>>>> = {
  60: { 10: [1.78, 968], 12: [2.125, 816], 15: [2.64, 662], 20: [3.5, 502], 30: [5.02, 306], 60: [8.19, 164], 120: [16.25, 70] },
  50: { 10: [1.779, 806], 25: [4.355, 338], 50: [7.75, 142], 100: [14.1, 66] },
};
/** P class: triangle of order 30 at 16 samples per cycle, whatever the rate (same source). */
const P_CLASS_ORDER = 30;
const SAMPLES_PER_CYCLE = 16;

function makeWindow(taps: Float64Array, stepS: number, origin: string): MeasuringWindow {
  const sum = taps.reduce((s, h) => s + h, 0);
  return { taps: taps.map((h) => h / sum), stepS, halfS: (taps.length * stepS) / 2, origin };
}

/**
 * The reference window of a class. For a rate that the table lacks, that of the nearest rate in it (by ratio), and `origin` says so.
 *   P: h(k) = 1 − 2|k|/(N+2)     M: h(k) = sin(x)/x·hamming(k), x = 2π·(2F/fs)·k
 */
export function referenceWindow(pmuClass: PmuClass, nominalHz: 50 | 60, reportingRateHz: number): MeasuringWindow {
  const fs = SAMPLES_PER_CYCLE * nominalHz;
  if (pmuClass === "P") {
    const taps = Float64Array.from(
      { length: P_CLASS_ORDER + 1 },
      (_, i) => 1 - (2 * Math.abs(i - P_CLASS_ORDER / 2)) / (P_CLASS_ORDER + 2),
    );
    return makeWindow(taps, 1 / fs, "P class reference");
  }
  const table = M_CLASS[nominalHz];
  const distance = (rate: number) => Math.abs(Math.log(rate / reportingRateHz));
  const rate = Object.keys(table)
    .map(Number)
    .reduce((best, r) => (distance(r) < distance(best) ? r : best));
  const [f, order] = table[rate]!;
  const taps = Float64Array.from({ length: order + 1 }, (_, i) => {
    const k = i - order / 2;
    const x = (2 * Math.PI * 2 * f * k) / fs;
    return (k === 0 ? 1 : Math.sin(x) / x) * (0.54 + 0.46 * Math.cos((2 * Math.PI * k) / order));
  });
  const origin =
    rate === reportingRateHz ? `M class reference at ${rate} frames/s` : `M class reference, nearest rate ${rate} frames/s`;
  return makeWindow(taps, 1 / fs, origin);
}

/** Running sums of window × exp(λu), u [s] from the window's centre: what a frame shows of exp(λt) switched on and off. */
export interface Kernel {
  readonly re: Float64Array;
  readonly im: Float64Array;
  readonly stepS: number;
  readonly firstEdgeS: number;
}

/** λ = (`growthPerS` + j·`radPerS`). Edges lie half-way between taps; between edges the sum is read linearly. */
export function kernelOf(window: MeasuringWindow, growthPerS: number, radPerS: number): Kernel {
  const n = window.taps.length;
  const re = new Float64Array(n + 1);
  const im = new Float64Array(n + 1);
  for (let k = 0; k < n; k++) {
    const u = (k - (n - 1) / 2) * window.stepS;
    const size = window.taps[k]! * Math.exp(growthPerS * u);
    re[k + 1] = re[k]! + size * Math.cos(radPerS * u);
    im[k + 1] = im[k]! + size * Math.sin(radPerS * u);
  }
  return { re, im, stepS: window.stepS, firstEdgeS: (-n / 2) * window.stepS };
}

/**
 * Adds `sign` × the running sum up to `u` to `out[at]`, `out[at + 1]`.
 * @param u  seconds from the frame's stamp; any value, also ±Infinity
 */
export function addKernelUpTo(kernel: Kernel, u: number, sign: 1 | -1, out: Float64Array, at: number): void {
  const last = kernel.re.length - 1;
  const x = (u - kernel.firstEdgeS) / kernel.stepS;
  if (!(x > 0)) return;
  if (x >= last) {
    out[at] = out[at]! + sign * kernel.re[last]!;
    out[at + 1] = out[at + 1]! + sign * kernel.im[last]!;
    return;
  }
  const k = Math.floor(x);
  const f = x - k;
  out[at] = out[at]! + sign * (kernel.re[k]! * (1 - f) + kernel.re[k + 1]! * f);
  out[at + 1] = out[at + 1]! + sign * (kernel.im[k]! * (1 - f) + kernel.im[k + 1]! * f);
}
