/**
 * A phasor measurement unit: samples turned back at nominal frequency and averaged with a fixed window, stamped with its centre.
 * Source: reference algorithms of IEC/IEEE 60255-118-1:2018 annex D (IEEE C37.118.1-2011 annex C), 16 samples a cycle; coefficients from memory.
 */
import type { PmuClass } from "../config/index.ts";
import { SAMPLES_PER_CYCLE } from "./line-model.ts";

/** M class: reporting rate -> [reference frequency Hz, order]. */
const M_FILTER: Readonly<Record<number, Readonly<Record<number, readonly [number, number]>>>> = {
  60: { 10: [1.78, 968], 12: [2.125, 816], 15: [2.64, 662], 20: [3.5, 502], 30: [5.02, 306], 60: [8.19, 164], 120: [16.25, 70] },
  50: { 10: [1.779, 806], 25: [4.355, 338], 50: [7.75, 142], 100: [14.1, 66] },
};

/** Filter weights, odd in number, symmetric, sum 1, at 16 samples a cycle. */
export function filterOf(pmuClass: PmuClass, nominalHz: number, reportingRateHz: number): Float64Array {
  const weights: number[] = [];
  if (pmuClass === "P") {
    const order = 2 * (SAMPLES_PER_CYCLE - 1);
    for (let k = -order / 2; k <= order / 2; k++) weights.push(1 - (2 * Math.abs(k)) / (order + 2));
  } else {
    const entry = M_FILTER[nominalHz]?.[reportingRateHz];
    if (!entry)
      throw new RangeError(
        `no M class reference filter for ${reportingRateHz} frames/s at ${nominalHz} Hz; there are ${Object.keys(M_FILTER[nominalHz] ?? {}).join(", ")}`,
      );
    const [reference, order] = entry;
    const fs = SAMPLES_PER_CYCLE * nominalHz;
    for (let k = -order / 2; k <= order / 2; k++) {
      const x = (2 * Math.PI * 2 * reference * k) / fs;
      weights.push((k === 0 ? 1 : Math.sin(x) / x) * (0.54 + 0.46 * Math.cos((2 * Math.PI * k) / order)));
    }
  }
  const sum = weights.reduce((s, h) => s + h, 0);
  return Float64Array.from(weights, (h) => h / sum);
}

/**
 * One phasor: rms, re and im into `out[at]`.
 * @param sampleAt  instantaneous value of sample k, k counted from the second's start at 16 samples a cycle
 * @param centre    sample at the stamp
 */
export function measureInto(
  filter: Float64Array,
  sampleAt: (k: number) => number,
  centre: number,
  out: Float64Array,
  at: number,
): void {
  const half = (filter.length - 1) / 2;
  let re = 0;
  let im = 0;
  for (let k = -half; k <= half; k++) {
    const x = filter[k + half]! * sampleAt(centre + k);
    const angle = (2 * Math.PI * (centre + k)) / SAMPLES_PER_CYCLE;
    re += x * Math.cos(angle);
    im -= x * Math.sin(angle);
  }
  out[at] = Math.SQRT2 * re;
  out[at + 1] = Math.SQRT2 * im;
}

/**
 * P class units divide by the gain of their triangle at the frequency they measured (same annex): sin(π(f₀ + 1.625·Δf)/(2f₀)).
 */
export const pClassCorrection = (nominalHz: number, deviationHz: number): number =>
  1 / Math.sin((Math.PI * (nominalHz + 1.625 * deviationHz)) / (2 * nominalHz));
