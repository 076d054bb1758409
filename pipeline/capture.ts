/**
 * Copies one terminal's frames around a disturbance out of the ring, so that locating is a pure function of what was captured and the ring may
 * run on.
 */
import type { Terminal } from "../config/index.ts";
import { NUMBERS_PER_ROW, type TerminalView } from "./terminal-view.ts";

export interface TerminalCapture {
  readonly terminal: Terminal;
  readonly nominalHz: 50 | 60;
  readonly periodS: number;
  /** Times below count from here [µs since 1970 UTC]; a whole UTC second, so that nominal frequency has phase zero there. */
  readonly epochUs: number;
  /** [frames] stamp, seconds from the epoch; only frames that came and may be used, ascending. */
  readonly timesS: Float64Array;
  /** [frames × (VA VB VC IA IB IC) × (re, im)] primary volt and ampere, rms; currents into the line. */
  readonly phasors: Float64Array;
  /** Frequency before the disturbance less nominal [Hz], median of the unit's own figures; 0 when it gave none. */
  readonly deltaHz: number;
  readonly missingFrames: number;
  readonly isSynchronised: boolean;
}

/** Size of a phase current (0..2 for A B C) in the newest frame [A]. */
export function newestCurrentAmp({ timesS, phasors }: TerminalCapture, phase: number): number {
  const at = (timesS.length - 1) * NUMBERS_PER_ROW + 6 + 2 * phase;
  return Math.hypot(phasors[at]!, phasors[at + 1]!);
}

/**
 * @param fromUs, toUs  span of stamps wanted
 * @param onsetUs       frames before this show the undisturbed frequency
 */
export function captureTerminal(
  view: TerminalView,
  nominalHz: 50 | 60,
  epochUs: number,
  fromUs: number,
  toUs: number,
  onsetUs: number,
): TerminalCapture {
  const { ring } = view;
  const first = Math.ceil(fromUs / ring.periodUs - 1e-6);
  const last = Math.min(Math.floor(toUs / ring.periodUs + 1e-6), ring.newestSlot);
  const room = Math.max(0, last - first + 1);
  const timesS = new Float64Array(room);
  const phasors = new Float64Array(room * NUMBERS_PER_ROW);
  const frequencies: number[] = [];
  let frames = 0;
  let isSynchronised = true;
  for (let slot = first; slot <= last; slot++) {
    const at = frames * NUMBERS_PER_ROW;
    if (!view.readInto(slot, phasors, at)) continue;
    let sum = 0;
    for (let k = 0; k < NUMBERS_PER_ROW; k++) sum += phasors[at + k]!;
    if (!Number.isFinite(sum)) continue;
    const timeUs = ring.timeUs[ring.rowOf(slot)]!;
    timesS[frames++] = (timeUs - epochUs) / 1e6;
    if (!view.isSynchronised(slot)) isSynchronised = false;
    const f = view.frequencyHz(slot);
    if (timeUs < onsetUs && Number.isFinite(f)) frequencies.push(f);
  }
  frequencies.sort((a, b) => a - b);
  const median = frequencies[frequencies.length >> 1];
  return {
    terminal: view.terminal,
    nominalHz,
    periodS: ring.periodUs / 1e6,
    epochUs,
    timesS: timesS.slice(0, frames),
    phasors: phasors.slice(0, frames * NUMBERS_PER_ROW),
    deltaHz: median !== undefined && Math.abs(median - nominalHz) < 5 ? median - nominalHz : 0,
    missingFrames: room - frames,
    isSynchronised,
  };
}
