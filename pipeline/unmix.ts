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
import { type LeastSquares, reduce, solveReduced } from "./least-squares.ts";
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

export interface States {
  /** VA VB VC IA IB IC, at the epoch's phase reference. */
  readonly pre: readonly Complex[];
  readonly fault: readonly Complex[];
  /** Undefined while the fault lasts. */
  readonly post: readonly Complex[] | undefined;
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
  };
}

/** Unknowns of each channel: before (re, im), fault (re, im), offset; then each interval of the clearing and the state after it (re, im). */
function unknowns(timing: Timing, model: ClearingModel): number {
  return timing.clearingS === Number.POSITIVE_INFINITY ? 5 : 7 + 2 * model.intervals;
}

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
  a: Float64Array;
  b: Float64Array;
}
const makeWorkspace = (): Workspace => ({ a: new Float64Array(0), b: new Float64Array(0) });

/** Fills and reduces one end's system. Returns the summed squared residual (channel scales), ridge rows included. */
function fitEnd(
  end: PreparedEnd,
  timing: Timing,
  model: ClearingModel,
  work: Workspace,
): { cost: number; rows: number; columns: number } {
  const columns = unknowns(timing, model);
  const isCleared = columns > 5;
  const ridgeRows = isCleared && model.ridge > 0 ? 2 * (model.intervals + 1) : 0;
  const rows = 2 * end.frames + ridgeRows + 1;
  if (work.a.length < rows * columns) work.a = new Float64Array(rows * columns);
  if (work.b.length < rows * CHANNELS) work.b = new Float64Array(rows * CHANNELS);
  const { a, b } = work;
  a.fill(0, 0, rows * columns);
  b.fill(0, 2 * end.frames * CHANNELS, rows * CHANNELS);

  const states = isCleared ? model.intervals + 3 : 2;
  for (let n = 0; n < end.frames; n++) {
    const t = end.timesS[n]!;
    const top = 2 * n * columns;
    const bottom = top + columns;
    for (let s = 0; s < states; s++) {
      const start = s === 0 ? Number.NEGATIVE_INFINITY : s === 1 ? timing.onsetS : timing.clearingS + (s - 2) * model.intervalS;
      const stop =
        s === 0 ? timing.onsetS : s === states - 1 ? Number.POSITIVE_INFINITY : timing.clearingS + (s - 1) * model.intervalS;
      if (start > t + end.window.halfS || stop < t - end.window.halfS) continue;
      const col = s < 2 ? 2 * s : 2 * s + 1;
      show(end, end.direct, 0, n, start, stop);
      const dRe = seen[0]!;
      const dIm = seen[1]!;
      show(end, end.image, 1, n, start, stop);
      const iRe = seen[0]!;
      const iIm = seen[1]!;
      a[top + col] = dRe + iRe;
      a[bottom + col] = dIm + iIm;
      a[top + col + 1] = -(dIm - iIm);
      a[bottom + col + 1] = dRe - iRe;
      if (s === 1) {
        show(end, end.offset, 2, n, start, stop);
        const size = Math.SQRT2 * Math.exp(-(t - start) / model.offsetS);
        a[top + 4] = size * seen[0]!;
        a[bottom + 4] = size * seen[1]!;
      }
    }
    for (let c = 0; c < CHANNELS; c++) {
      const at = (n * CHANNELS + c) * 2;
      b[2 * n * CHANNELS + c] = end.phasors[at]! / end.scale[c]!;
      b[(2 * n + 1) * CHANNELS + c] = end.phasors[at + 1]! / end.scale[c]!;
    }
  }
  let row = 2 * end.frames;
  if (ridgeRows > 0) {
    for (let s = 1; s < states - 1; s++) {
      const here = s === 1 ? 2 : 2 * s + 1;
      const next = 2 * s + 3;
      for (let q = 0; q < 2; q++, row++) {
        a[row * columns + here + q] = -model.ridge;
        a[row * columns + next + q] = model.ridge;
      }
    }
  }
  a[row * columns + 4] = 0.3 * (model.ridge || PROFILE.ridge); // the offset is small too
  return { cost: reduce(a, b, rows, columns, CHANNELS), rows, columns };
}

/** The linear part: all states at a given timing. */
export function statesAt(end: PreparedEnd, timing: Timing, model: ClearingModel): States {
  const work = makeWorkspace();
  const { rows, columns } = fitEnd(end, timing, model, work);
  const fit = solveReduced(work.a, work.b, rows, columns, CHANNELS);
  const total = fit.residual.reduce((s, r) => s + r, 0);
  const freedom = Math.max(1, 2 * end.frames - columns);
  return {
    pre: phasorsOf(fit, 0, end.scale),
    fault: phasorsOf(fit, 2, end.scale),
    post: columns > 5 ? phasorsOf(fit, columns - 2, end.scale) : undefined,
    faultSd: spreadOf(fit, 2, end.scale, freedom),
    preSd: spreadOf(fit, 0, end.scale, freedom),
    residual: Math.sqrt(total / (end.frames * CHANNELS)),
  };
}

const phasorsOf = (fit: LeastSquares, row: number, scale: Float64Array): Complex[] =>
  Array.from({ length: CHANNELS }, (_, c) =>
    complex(fit.solution[row * CHANNELS + c]! * scale[c]!, fit.solution[(row + 1) * CHANNELS + c]! * scale[c]!),
  );
const spreadOf = (fit: LeastSquares, row: number, scale: Float64Array, freedom: number): number[] =>
  Array.from({ length: CHANNELS }, (_, c) => Math.sqrt((fit.residual[c]! / freedom) * fit.varianceFactor[row]!) * scale[c]!);

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
    for (const end of ends) total += fitEnd(end, timing, model, work).cost;
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
