/**
 * Notices that a terminal's sequence currents jump away from where its undisturbed frames would have turned to.
 *
 * Per frame: ΔI_s = I_s[n] − I_s[n−lag]·exp(j2πΔf·lag·T) for zero, positive and negative sequence, Δf from the unit's own frequency. A running
 * median of |ΔI_s| is the noise level. A terminal is disturbed when two frames in a row exceed both a multiple of the noise and an absolute
 * floor. Constant work and no allocation per frame: this runs on every frame of every terminal.
 */
import { sequenceInto } from "./sequence.ts";
import { NUMBERS_PER_ROW, type TerminalView } from "./terminal-view.ts";

/** Frames between the two that are compared: longer than the rise of an M class window's step response, so that a step is seen whole. */
const LAG = 8;
/** A jump of the ratio of 10 to the median of Rayleigh noise happens once in some 10^29 frames; the floor is what matters in practice. */
const NOISE_MULTIPLE = 10;
/** Share of the positive-sequence current; load noise on transmission lines stays below it. Common practice, no source. */
const FLOOR_SHARE = 0.04;
/** Some ampere, so that an open line's charging noise is no jump: one part in a hundred of a usual 1 kA primary rating. */
const FLOOR_AMP = 10;
/** Frames until the noise level is believed. */
const WARM_UP_FRAMES = 24;
/** Quiet frames after a disturbance until the next one may be noticed. */
const QUIET_FRAMES = LAG + 4;
/** Step of the running median, share of its own size. */
const MEDIAN_STEP = 0.05;

export interface Trigger {
  /** Stamp of the first frame that showed the jump [µs]. */
  readonly timeUs: number;
  readonly slot: number;
  /** Largest superimposed sequence current so far [A]. */
  readonly jumpAmp: number;
}

export class OnsetDetector {
  readonly #view: TerminalView;
  readonly #row = new Float64Array(NUMBERS_PER_ROW);
  /** [LAG + 1 × (I0, I1, I2) × (re, im)] */
  readonly #history = new Float64Array((LAG + 1) * 6);
  readonly #noise = new Float64Array(3);
  #lastSlot = -1;
  #goodFrames = 0;
  #exceeding = 0;
  #quiet = 0;
  #isDisturbed = false;
  #first: { timeUs: number; slot: number } | undefined;

  constructor(view: TerminalView) {
    this.#view = view;
  }

  /** Looks at the frames up to `lastSlot` that it has not seen; returns a trigger when a disturbance begins. Late frames behind it are not looked at. */
  step(lastSlot: number): Trigger | undefined {
    let trigger: Trigger | undefined;
    const { ring } = this.#view;
    if (this.#lastSlot < 0 || lastSlot - this.#lastSlot > ring.capacity) this.#lastSlot = lastSlot - 1;
    for (let slot = this.#lastSlot + 1; slot <= lastSlot; slot++) {
      if (!this.#view.readInto(slot, this.#row, 0)) {
        this.#goodFrames = 0; // across a gap nothing can be extrapolated
        this.#exceeding = 0;
        continue;
      }
      trigger ??= this.#look(slot);
    }
    this.#lastSlot = Math.max(this.#lastSlot, lastSlot);
    return trigger;
  }

  #look(slot: number): Trigger | undefined {
    const here = (this.#goodFrames % (LAG + 1)) * 6;
    sequenceInto(this.#row, 6, this.#history, here);
    this.#goodFrames++;
    if (this.#goodFrames <= LAG) return undefined;
    const past = (this.#goodFrames % (LAG + 1)) * 6; // the oldest row of the history: LAG frames ago
    const { ring, terminal } = this.#view;
    const nominal = ring.units.find((u) => u.idCode === terminal.measured?.unitIdCode)?.nominalHz ?? 60;
    const f = this.#view.frequencyHz(slot - LAG);
    const turn = Number.isFinite(f) && Math.abs(f - nominal) < 5 ? (2 * Math.PI * (f - nominal) * LAG * ring.periodUs) / 1e6 : 0;
    const cos = Math.cos(turn);
    const sin = Math.sin(turn);
    const positive = Math.hypot(this.#history[past + 2]!, this.#history[past + 3]!);
    let largest = 0;
    let exceeds = false;
    for (let s = 0; s < 3; s++) {
      const re = this.#history[past + 2 * s]!;
      const im = this.#history[past + 2 * s + 1]!;
      const jump = Math.hypot(
        this.#history[here + 2 * s]! - (re * cos - im * sin),
        this.#history[here + 2 * s + 1]! - (re * sin + im * cos),
      );
      const noise = this.#noise[s]!;
      if (jump > NOISE_MULTIPLE * noise && jump > FLOOR_SHARE * positive + FLOOR_AMP) exceeds = true;
      else if (!this.#isDisturbed)
        this.#noise[s] = noise === 0 ? jump : noise * (jump > noise ? 1 + MEDIAN_STEP : 1 - MEDIAN_STEP);
      if (jump > largest) largest = jump;
      if (Number.isNaN(jump)) return undefined;
    }
    if (!exceeds) {
      this.#exceeding = 0;
      if (this.#isDisturbed && ++this.#quiet >= QUIET_FRAMES) this.#isDisturbed = false;
      return undefined;
    }
    this.#quiet = 0;
    if (this.#isDisturbed || this.#goodFrames < WARM_UP_FRAMES) return undefined;
    if (++this.#exceeding === 1) this.#first = { timeUs: ring.timeUs[ring.rowOf(slot)]!, slot };
    if (this.#exceeding < 2) return undefined;
    this.#isDisturbed = true;
    this.#exceeding = 0;
    return { ...this.#first!, jumpAmp: largest };
  }
}
