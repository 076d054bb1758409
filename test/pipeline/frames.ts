/**
 * Frames of a two-source line for the pipeline's tests: sinusoids of the hand-solved states, switched at onset and pole by pole at the clearing, with the
 * decaying offset that keeps currents continuous, measured by a windowed Fourier sum. Simpler than the simulator on purpose: every number in it is known.
 */
import type { Network } from "../../config/index.ts";
import type { FrameBlock, FrameRing } from "../../ingest/types.ts";
import { referenceWindow } from "../../pipeline/measuring-window.ts";
import { normalDeviates } from "../../pipeline/random.ts";
import type { C, EndPhasorSet } from "../published/two-source-network.ts";

export interface Course {
  onsetUs: number;
  /** After the onset [s]; Infinity leaves it on. */
  clearAfterS: number;
  /** Later opening of poles A, B, C and of the second end [s]. */
  poleDelaysS: readonly [number, number, number];
  farEndDelayS: number;
  fromUs: number;
  toUs: number;
  /** Relative to each channel. */
  noise: number;
  offsetS: number;
}

/** A ring that a test fills. */
export function plainRing(
  feedId: string,
  idCode: number,
  rateHz: number,
  nominalHz: 50 | 60,
  capacity = 512,
): FrameRing & { put(timeUs: number, phasors: readonly C[]): number } {
  const periodUs = 1e6 / rateHz;
  const slots = new Float64Array(capacity).fill(-1);
  let newest = -1;
  const ring = {
    feedId,
    columns: ["VA", "VB", "VC", "IA", "IB", "IC"].map((name, k) => ({
      unitIdCode: idCode,
      unitName: feedId,
      name,
      kind: k < 3 ? ("voltage" as const) : ("current" as const),
      indexInUnit: k,
    })),
    units: [{ idCode, name: feedId, nominalHz }],
    periodUs,
    capacity,
    timeUs: new Float64Array(capacity),
    arrivedUs: new Float64Array(capacity),
    timeQuality: new Uint8Array(capacity),
    phasors: new Float64Array(capacity * 12),
    frequencyHz: new Float64Array(capacity),
    rocofHzPerS: new Float64Array(capacity),
    stat: new Uint16Array(capacity),
    get newestSlot() {
      return newest;
    },
    rowOf: (slot: number) => (slots[slot % capacity] === slot ? slot % capacity : -1),
    put(timeUs: number, phasors: readonly C[]): number {
      const slot = Math.round(timeUs / periodUs);
      const row = slot % capacity;
      slots[row] = slot;
      ring.timeUs[row] = timeUs;
      ring.arrivedUs[row] = timeUs;
      ring.frequencyHz[row] = nominalHz;
      phasors.forEach((p, k) => {
        ring.phasors[row * 12 + 2 * k] = p.re;
        ring.phasors[row * 12 + 2 * k + 1] = p.im;
      });
      newest = Math.max(newest, slot);
      return slot;
    },
  };
  return ring;
}

/** Blocks of one frame each, of both ends, in time order. `ends` in the order of the line's terminals; undefined where none is measured. */
export function* blocksOf(
  network: Network,
  ends: readonly (EndPhasorSet | undefined)[],
  course: Course,
  seed = 7,
): Generator<FrameBlock> {
  const normal = normalDeviates(seed);
  const line = network.lines[0]!;
  const w = 2 * Math.PI * network.frequencyHz;
  const epochUs = Math.floor(course.fromUs / 1e6) * 1e6;
  const out: { timeUs: number; block: () => FrameBlock }[] = [];
  line.terminals.forEach((terminal, e) => {
    const end = ends[e];
    const feed = network.feeds.find((f) => f.id === terminal.measured?.feedId);
    if (!end || !feed) return;
    const window = referenceWindow(feed.pmuClass, network.frequencyHz, feed.reportingRateHz);
    const ring = plainRing(feed.id, feed.idCode, feed.reportingRateHz, network.frequencyHz);
    const t0 = (course.onsetUs - epochUs) / 1e6;
    const opening = (phase: number) => t0 + course.clearAfterS + course.poleDelaysS[phase]! + e * course.farEndDelayS;
    const signal = (c: number, t: number): number => {
      const wave = (x: C) => Math.SQRT2 * (x.re * Math.cos(w * t) - x.im * Math.sin(w * t));
      if (t < t0) return wave(end.pre[c]!);
      if (t >= opening(c % 3)) return c < 3 ? wave(end.pre[c]!) : 0;
      if (c < 3) return wave(end.fault[c]!);
      const d = { re: end.pre[c]!.re - end.fault[c]!.re, im: end.pre[c]!.im - end.fault[c]!.im };
      const jump = Math.SQRT2 * (d.re * Math.cos(w * t0) - d.im * Math.sin(w * t0));
      return wave(end.fault[c]!) + jump * Math.exp(-(t - t0) / course.offsetS);
    };
    const sizes = end.fault.map((f, c) => Math.max(Math.hypot(f.re, f.im), Math.hypot(end.pre[c]!.re, end.pre[c]!.im)));
    const n = window.taps.length;
    for (let slot = Math.ceil(course.fromUs / ring.periodUs); slot * ring.periodUs <= course.toUs; slot++) {
      const timeUs = Math.round(slot * ring.periodUs);
      const centre = (timeUs - epochUs) / 1e6;
      const phasors = Array.from({ length: 6 }, (_, c) => {
        let re = 0;
        let im = 0;
        for (let k = 0; k < n; k++) {
          const t = centre + (k - (n - 1) / 2) * window.stepS;
          const x = Math.SQRT2 * window.taps[k]! * signal(c, t);
          re += x * Math.cos(w * t);
          im -= x * Math.sin(w * t);
        }
        const s = (course.noise * sizes[c]!) / Math.SQRT2;
        return { re: re + s * normal(), im: im + s * normal() };
      });
      out.push({
        timeUs,
        block: () => {
          const at = ring.put(timeUs, phasors);
          return { feedId: feed.id, ring, firstSlot: at, lastSlot: at };
        },
      });
    }
  });
  // Each block is made when it is its turn: the ring holds what has come so far.
  for (const { block } of out.sort((p, q) => p.timeUs - q.timeUs)) yield block();
}
