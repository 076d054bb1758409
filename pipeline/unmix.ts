/**
 * Unmixing: the phasors of the fault from frames whose window straddles its onset or clearing.
 *
 * Between changes the network is in steady state, so every channel of a terminal is a sum of states (before, fault, clearing, after), each seen
 * through the window for as long as it lasts; the weights are the same for all channels. Given onset and clearing the states are a linear
 * least-squares solution; onset and clearing are searched (separable least squares: Golub & Pereyra 1973). Each state brings its image at
 * minus the frequency, the fault state a decaying offset. Breakers open pole by pole and end by end, so the clearing is a profile: short
 * intervals after the first opening, each a state of its own, held to its neighbours by a weak ridge.
 */
import { type Complex, complex } from "./complex.ts";
import { reduce, solveReduced } from "./least-squares.ts";
import { addKernelUpTo, type Kernel, kernelOf, type MeasuringWindow } from "./measuring-window.ts";

const CHANNELS = 6;

/** One terminal's part of the fit. */
export interface FittedEnd {
  /** [frames] seconds from the epoch. */
  readonly timesS: Float64Array;
  /** [frames × 6 × (re, im)] */
  readonly phasors: Float64Array;
  readonly window: MeasuringWindow;
  readonly nominalHz: number;
  readonly deltaHz: number;
}

export interface Timing {
  readonly onsetS: number;
  /** First opening; Infinity while the fault lasts. */
  readonly clearingS: number;
}

/** How the clearing and the offset are modelled. */
export interface ClearingModel {
  /** Further intervals after the first opening, and the length of each [s]. */
  readonly intervals: number;
  readonly intervalS: number;
  /** Weight of "change little from your neighbour", in units of the channel's scale. */
  readonly ridge: number;
  /** Time constant of the decaying offset [s]. */
  readonly offsetS: number;
}

/** Five states, 3 ms apart: 12 ms covers poles at successive current zeros and ends some milliseconds apart. */
export const PROFILE: ClearingModel = { intervals: 4, intervalS: 0.003, ridge: 0.02, offsetS: 0.04 };

/** The free offset beside what continuity gives, and trapped charge, in units of the ridge: both are known to be there, not how large. */
const OFFSET_RIDGE = 2;
const TRAPPED_RIDGE = 0.1;

export interface States {
  /** VA VB VC IA IB IC, at the epoch's phase reference. */
  readonly pre: readonly Complex[];
  readonly fault: readonly Complex[];
  /** Standard deviation of re (as of im) of each fault phasor, from the fit's own residual [V, A]. */
  readonly faultSd: readonly number[];
  readonly preSd: readonly number[];
  /** Root mean square of the residual over all channels, relative to each channel's largest frame. */
  readonly residual: number;
}

export interface PreparedEnd extends FittedEnd {
  readonly frames: number;
  /** Largest magnitude of each channel: fits are made in units of it. */
  readonly scale: Float64Array;
  readonly direct: Kernel;
  readonly image: Kernel;
  readonly offset: Kernel;
  /** A voltage that stands still: the charge of an opened line. */
  readonly constant: Kernel;
  /** [frames × 6] cos, sin of the turning of direct, image, offset since the epoch. */
  readonly turns: Float64Array;
}

export function prepareEnd(end: FittedEnd, offsetS: number): PreparedEnd {
  const frames = end.timesS.length;
  const scale = new Float64Array(CHANNELS);
  for (let n = 0; n < frames; n++) {
    for (let c = 0; c < CHANNELS; c++) {
      const at = (n * CHANNELS + c) * 2;
      scale[c] = Math.max(scale[c]!, Math.hypot(end.phasors[at]!, end.phasors[at + 1]!));
    }
  }
  // Phases share a scale, so that a channel with next to nothing on it does not count like one that carries the fault.
  for (const first of [0, 3]) {
    const largest = Math.max(scale[first]!, scale[first + 1]!, scale[first + 2]!, 1e-9);
    for (let c = first; c < first + 3; c++) scale[c] = largest;
  }
  const turn = 2 * Math.PI * end.deltaHz;
  const imageTurn = -2 * Math.PI * (2 * end.nominalHz + end.deltaHz);
  const offsetTurn = -2 * Math.PI * end.nominalHz;
  const turns = new Float64Array(frames * 6);
  for (let n = 0; n < frames; n++) {
    const t = end.timesS[n]!;
    [turn, imageTurn, offsetTurn].forEach((w, k) => {
      turns[n * 6 + 2 * k] = Math.cos(w * t);
      turns[n * 6 + 2 * k + 1] = Math.sin(w * t);
    });
  }
  return {
    ...end,
    frames,
    scale,
    turns,
    direct: kernelOf(end.window, 0, turn),
    image: kernelOf(end.window, 0, imageTurn),
    offset: kernelOf(end.window, -1 / offsetS, offsetTurn),
    constant: kernelOf(end.window, 0, offsetTurn),
  };
}

/** Columns of the linear system: before (re, im), fault (re, im), offset; then each interval of the clearing and the state after it (re, im), trapped charge. */
const PRE = 0;
const FAULT = 2;
const OFFSET = 4;
const FIRST_INTERVAL = 5;

/** Voltages and currents are fitted apart: a current cannot jump, so its offset follows from the states; a voltage keeps the charge of the opened line. */
const groups = [
  { first: 0, isCurrent: false },
  { first: 3, isCurrent: true },
] as const;
const PER_GROUP = 3;

const seen = new Float64Array(2);
/** What the kernel shows between `startS` and `stopS` at frame n, turned to the epoch; left in `seen`. */
function show(end: PreparedEnd, kernel: Kernel, which: 0 | 1 | 2, n: number, startS: number, stopS: number): void {
  const t = end.timesS[n]!;
  seen[0] = 0;
  seen[1] = 0;
  addKernelUpTo(kernel, stopS - t, 1, seen, 0);
  addKernelUpTo(kernel, startS - t, -1, seen, 0);
  const c = end.turns[n * 6 + 2 * which]!;
  const s = end.turns[n * 6 + 2 * which + 1]!;
  const re = seen[0]! * c - seen[1]! * s;
  seen[1] = seen[0]! * s + seen[1]! * c;
  seen[0] = re;
}

interface Workspace {
  /** Responses of all columns, shared by both groups. */
  base: Float64Array;
  a: Float64Array;
  b: Float64Array;
}
const makeWorkspace = (): Workspace => ({ base: new Float64Array(0), a: new Float64Array(0), b: new Float64Array(0) });

interface Shape {
  readonly rows: number;
  readonly columns: number;
}

/** Fills `work.base` with what each frame shows of each column at unit size, then the ridge rows. */
function fillBase(end: PreparedEnd, timing: Timing, model: ClearingModel, work: Workspace): Shape {
  const isCleared = timing.clearingS !== Number.POSITIVE_INFINITY;
  const states = isCleared ? model.intervals + 3 : 2;
  const columns = isCleared ? FIRST_INTERVAL + 2 * model.intervals + 3 : FIRST_INTERVAL;
  const ridgeRows = isCleared ? 2 * (model.intervals + 1) + 1 : 0;
  const rows = 2 * end.frames + ridgeRows + 1;
  if (work.base.length < rows * columns) {
    work.base = new Float64Array(rows * columns);
    work.a = new Float64Array(rows * columns);
    work.b = new Float64Array(rows * PER_GROUP);
  }
  const { base } = work;
  base.fill(0, 0, rows * columns);
  for (let n = 0; n < end.frames; n++) {
    const t = end.timesS[n]!;
    const top = 2 * n * columns;
    const bottom = top + columns;
    for (let s = 0; s < states; s++) {
      const start = s === 0 ? Number.NEGATIVE_INFINITY : s === 1 ? timing.onsetS : timing.clearingS + (s - 2) * model.intervalS;
      const isLast = s === states - 1;
      const stop = s === 0 ? timing.onsetS : isLast ? Number.POSITIVE_INFINITY : timing.clearingS + (s - 1) * model.intervalS;
      if (start > t + end.window.halfS || stop < t - end.window.halfS) continue;
      const col = s < 2 ? 2 * s : 2 * s + 1;
      show(end, end.direct, 0, n, start, stop);
      const dRe = seen[0]!;
      const dIm = seen[1]!;
      show(end, end.image, 1, n, start, stop);
      const iRe = seen[0]!;
      const iIm = seen[1]!;
      base[top + col] = dRe + iRe;
      base[bottom + col] = dIm + iIm;
      base[top + col + 1] = -(dIm - iIm);
      base[bottom + col + 1] = dRe - iRe;
      if (s === 1) {
        show(end, end.offset, 2, n, start, stop);
        const size = Math.SQRT2 * Math.exp(-(t - start) / model.offsetS);
        base[top + OFFSET] = size * seen[0]!;
        base[bottom + OFFSET] = size * seen[1]!;
      } else if (isLast && isCleared) {
        show(end, end.constant, 2, n, start, stop);
        base[top + columns - 1] = Math.SQRT2 * seen[0]!;
        base[bottom + columns - 1] = Math.SQRT2 * seen[1]!;
      }
    }
  }
  let row = 2 * end.frames;
  if (isCleared) {
    for (let s = 1; s < states - 1; s++) {
      const here = s === 1 ? FAULT : 2 * s + 1;
      const next = 2 * s + 3;
      for (let q = 0; q < 2; q++, row++) {
        base[row * columns + here + q] = -model.ridge;
        base[row * columns + next + q] = model.ridge;
      }
    }
    base[row * columns + columns - 1] = TRAPPED_RIDGE * model.ridge;
    row++;
  }
  base[row * columns + OFFSET] = OFFSET_RIDGE * model.ridge;
  return { rows, columns };
}

/** Brings one group's system into `work.a`, `work.b` and reduces it; returns its summed squared residual (channel scales), ridge rows included. */
function reduceGroup(end: PreparedEnd, timing: Timing, work: Workspace, { rows, columns }: Shape, g: 0 | 1): number {
  const { base, a, b } = work;
  const { first, isCurrent } = groups[g];
  a.set(base.subarray(0, rows * columns));
  b.fill(0, 2 * end.frames * PER_GROUP, rows * PER_GROUP);
  if (isCurrent) {
    // i(t0+) = i(t0−): the offset is what the states lack of each other at the onset; the free column keeps what this misses.
    const angle = 2 * Math.PI * (end.nominalHz + end.deltaHz) * timing.onsetS;
    const cos = Math.SQRT2 * Math.cos(angle);
    const sin = Math.SQRT2 * Math.sin(angle);
    for (let row = 0; row < 2 * end.frames; row++) {
      const at = row * columns;
      const offset = a[at + OFFSET]! / Math.SQRT2;
      a[at + PRE] = a[at + PRE]! + cos * offset;
      a[at + PRE + 1] = a[at + PRE + 1]! - sin * offset;
      a[at + FAULT] = a[at + FAULT]! - cos * offset;
      a[at + FAULT + 1] = a[at + FAULT + 1]! + sin * offset;
    }
    // No charge is left on a current.
    if (columns > FIRST_INTERVAL) for (let row = 0; row < 2 * end.frames; row++) a[row * columns + columns - 1] = 0;
  }
  for (let n = 0; n < end.frames; n++) {
    for (let k = 0; k < PER_GROUP; k++) {
      const at = (n * CHANNELS + first + k) * 2;
      b[2 * n * PER_GROUP + k] = end.phasors[at]! / end.scale[first + k]!;
      b[(2 * n + 1) * PER_GROUP + k] = end.phasors[at + 1]! / end.scale[first + k]!;
    }
  }
  return reduce(a, b, rows, columns, PER_GROUP);
}

/** Summed squared residual of one end's frames at a timing. */
function costOf(end: PreparedEnd, timing: Timing, model: ClearingModel, work: Workspace): number {
  const shape = fillBase(end, timing, model, work);
  return reduceGroup(end, timing, work, shape, 0) + reduceGroup(end, timing, work, shape, 1);
}

/** The linear part: all states at a given timing. */
export function statesAt(end: PreparedEnd, timing: Timing, model: ClearingModel): States {
  const work = makeWorkspace();
  const shape = fillBase(end, timing, model, work);
  const freedom = Math.max(1, 2 * end.frames - shape.columns);
  let total = 0;
  const parts = ([0, 1] as const).map((g) => {
    reduceGroup(end, timing, work, shape, g);
    const fit = solveReduced(work.a, work.b, shape.rows, shape.columns, PER_GROUP);
    total += fit.residual.reduce((s, r) => s + r, 0);
    const { first } = groups[g];
    const phasors = (column: number) =>
      Array.from({ length: PER_GROUP }, (_, k) =>
        complex(
          fit.solution[column * PER_GROUP + k]! * end.scale[first + k]!,
          fit.solution[(column + 1) * PER_GROUP + k]! * end.scale[first + k]!,
        ),
      );
    const sd = (column: number) =>
      Array.from(
        { length: PER_GROUP },
        (_, k) => Math.sqrt((fit.residual[k]! / freedom) * fit.varianceFactor[column]!) * end.scale[first + k]!,
      );
    return {
      pre: phasors(PRE),
      fault: phasors(FAULT),
      preSd: sd(PRE),
      faultSd: sd(FAULT),
    };
  });
  const [v, i] = parts as [(typeof parts)[0], (typeof parts)[0]];
  return {
    pre: [...v.pre, ...i.pre],
    fault: [...v.fault, ...i.fault],
    preSd: [...v.preSd, ...i.preSd],
    faultSd: [...v.faultSd, ...i.faultSd],
    residual: Math.sqrt(total / (end.frames * CHANNELS)),
  };
}

export interface TimingFit {
  readonly timing: Timing;
  /** Summed squared residual of all ends, channel scales. */
  readonly cost: number;
  readonly stoppedBy: "converged" | "limit";
}

/**
 * Onset and clearing that explain all ends' frames best: a simplex search (Nelder & Mead 1965) from a start good to some milliseconds.
 * @param start  clearing Infinity: the fault is taken to last, and only the onset is sought
 */
export function fitTiming(ends: readonly PreparedEnd[], start: Timing, model: ClearingModel): TimingFit {
  const work = makeWorkspace();
  const cost = (timing: Timing): number => {
    let total = 0;
    for (const end of ends) total += costOf(end, timing, model, work);
    return total;
  };
  if (start.clearingS === Number.POSITIVE_INFINITY) {
    const line = minimise((p) => cost({ onsetS: p[0]!, clearingS: Number.POSITIVE_INFINITY }), [start.onsetS], [0.0015]);
    return { timing: { onsetS: line.at[0]!, clearingS: Number.POSITIVE_INFINITY }, cost: line.cost, stoppedBy: line.stoppedBy };
  }
  const plane = minimise(
    (p) => (p[1]! <= p[0]! + 0.005 ? Number.POSITIVE_INFINITY : cost({ onsetS: p[0]!, clearingS: p[1]! })),
    [start.onsetS, start.clearingS],
    [0.0015, -0.003],
  );
  return { timing: { onsetS: plane.at[0]!, clearingS: plane.at[1]! }, cost: plane.cost, stoppedBy: plane.stoppedBy };
}

/** Nelder & Mead's simplex in one or two dimensions; ends when the corners lie within 5 µs of each other. */
function minimise(f: (p: readonly number[]) => number, start: readonly number[], step: readonly number[]) {
  const corners = [start, ...start.map((_, k) => start.map((x, i) => (i === k ? x + step[k]! : x)))].map((at) => ({
    at,
    cost: f(at),
  }));
  const n = start.length;
  for (let turn = 0; turn < 120; turn++) {
    corners.sort((p, q) => p.cost - q.cost);
    const [first, last] = [corners[0]!, corners[n]!];
    if (corners.every((c) => c.at.every((x, i) => Math.abs(x - first.at[i]!) < 5e-6)))
      return { ...first, stoppedBy: "converged" as const };
    const centre = start.map((_, i) => corners.slice(0, n).reduce((s, c) => s + c.at[i]!, 0) / n);
    const along = (k: number) => {
      const at = centre.map((x, i) => x + k * (x - last.at[i]!));
      return { at, cost: f(at) };
    };
    const reflected = along(1);
    if (reflected.cost < first.cost) {
      const expanded = along(2);
      corners[n] = expanded.cost < reflected.cost ? expanded : reflected;
    } else if (reflected.cost < corners[n - 1]!.cost) corners[n] = reflected;
    else {
      const contracted = along(reflected.cost < last.cost ? 0.5 : -0.5);
      if (contracted.cost < Math.min(last.cost, reflected.cost)) corners[n] = contracted;
      else
        for (let k = 1; k <= n; k++) {
          const at = corners[k]!.at.map((x, i) => (x + first.at[i]!) / 2);
          corners[k] = { at, cost: f(at) };
        }
    }
  }
  corners.sort((p, q) => p.cost - q.cost);
  return { ...corners[0]!, stoppedBy: "limit" as const };
}
