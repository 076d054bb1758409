/**
 * Phasors from instantaneous values as a relay makes them: a sliding Fourier sum over one cycle (or half of one), after a filter that removes the
 * decaying offset. Source: Phadke & Thorp, Computer Relaying for Power Systems (one- and half-cycle Fourier); the offset filter is the digital mimic of
 * Benmouyal, IEEE Trans. Power Delivery 10 (1995); equations from memory.
 */

export interface SlidingPhasors {
  /** [windows] centre of each window, seconds from the first sample. */
  readonly timesS: Float64Array;
  /** [windows × (re, im)] rms, turned back at nominal frequency so that a steady sinusoid at nominal stands still. */
  readonly phasors: Float64Array;
}

/**
 * Removes a decaying offset: y[n] = K·((1 + τ)·x[n] − τ·x[n−1]), τ in samples, K such that the gain at nominal is one. The phase that it adds is
 * turned back by `slidingPhasors`, which is told of it.
 */
export function mimicFilter(
  x: Float64Array,
  samplesPerCycle: number,
  offsetCycles: number,
): { readonly values: Float64Array; readonly phaseRad: number } {
  const tau = offsetCycles * samplesPerCycle;
  const w = (2 * Math.PI) / samplesPerCycle;
  const re = 1 + tau - tau * Math.cos(w);
  const im = tau * Math.sin(w);
  const gain = 1 / Math.hypot(re, im);
  const values = new Float64Array(x.length);
  for (let n = 1; n < x.length; n++) values[n] = gain * ((1 + tau) * x[n]! - tau * x[n - 1]!);
  values[0] = values[1] ?? 0;
  return { values, phaseRad: Math.atan2(im, re) };
}

/**
 * @param x                instantaneous values at even intervals
 * @param samplesPerCycle  need not be whole: the window is the nearest whole number of samples
 * @param cycles           1, or 0.5 for the half-cycle sum (which even harmonics and any offset disturb)
 * @param phaseRad         phase lead of a filter that went before
 * @throws RangeError when the record is shorter than the window, or has under 8 samples a cycle
 */
export function slidingPhasors(
  x: Float64Array,
  sampleS: number,
  nominalHz: number,
  cycles: 1 | 0.5,
  phaseRad = 0,
): SlidingPhasors {
  const samplesPerCycle = 1 / (nominalHz * sampleS);
  if (samplesPerCycle < 8) throw new RangeError(`${samplesPerCycle.toFixed(1)} samples a cycle: at least 8 are needed`);
  const length = Math.round(cycles * samplesPerCycle);
  const windows = x.length - length + 1;
  if (windows < 1) throw new RangeError(`${x.length} samples are fewer than one window of ${length}`);
  const timesS = new Float64Array(windows);
  const phasors = new Float64Array(windows * 2);
  const w = 2 * Math.PI * nominalHz * sampleS;
  const scale = Math.SQRT2 / length;
  for (let k = 0; k < windows; k++) {
    let re = 0;
    let im = 0;
    for (let n = k; n < k + length; n++) {
      re += x[n]! * Math.cos(w * n + phaseRad);
      im -= x[n]! * Math.sin(w * n + phaseRad);
    }
    timesS[k] = (k + (length - 1) / 2) * sampleS;
    phasors[2 * k] = re * scale;
    phasors[2 * k + 1] = im * scale;
  }
  return { timesS, phasors };
}
