/** Locating as a pure function: the captured frames of a line's measured ends in, the place with its stretch, flag and reasons out. */
import type { Line } from "../config/index.ts";
import { newestCurrentAmp, type TerminalCapture } from "./capture.ts";
import { type Combined, combine, towerSpan } from "./combine.ts";
import { abs } from "./complex.ts";
import { judge } from "./direction.ts";
import { type EndPhasors, type Evidence, faultCurrents, gatherEvidence, NEGATIVE_TWO_ENDED } from "./evidence.ts";
import { isGrounded, phasesOf } from "./fault-loop.ts";
import { flagOf } from "./flag.ts";
import { mixedFrame, UNMIXED, unmixedPhasors, wholeWindowPhasors } from "./frame-choice.ts";
import type { MeasuringWindow } from "./measuring-window.ts";
import { selectPhases } from "./phase-selection.ts";
import { roughTiming } from "./rough-timing.ts";
import type { Progress } from "./steadiness.ts";
import type { FaultType, LocateStage, Location } from "./types.ts";
import { fitTiming, PROFILE, prepareEnd, type Timing } from "./unmix.ts";

export interface CapturedEnd {
  readonly capture: TerminalCapture;
  readonly window: MeasuringWindow;
  /** Stamp of the first frame that was disturbed, seconds from the epoch. */
  readonly disturbedS: number;
  readonly progress: Progress;
}

export interface LineDisturbance {
  readonly line: Line;
  /** Ends with frames, in the order of the line's terminals. */
  readonly ends: readonly CapturedEnd[];
  readonly stationName: (stationId: string) => string;
  readonly stage: LocateStage;
}

export type Finding =
  | {
      readonly kind: "located";
      readonly location: Location;
      readonly onsetS: number;
      /** Infinity while it lasts. */
      readonly clearingS: number;
    }
  | { readonly kind: "elsewhere"; readonly reason: string; readonly onsetS: number }
  | { readonly kind: "wait" };

/** What the fit leaves unexplained, as an error of the place: fraction of the line per unit of residual. Measured on the simulator's campaigns. */
const PLACE_ERROR_OF_RESIDUAL = 0.15;
/** Floor of what no draw covers (formulas, sampling), fraction of the line. */
const PLACE_ERROR_FLOOR = 0.0003;
/** See `unmixingError`. */
const UNMIXING_ERROR = 0.0002;
/** Error of superimposed positive sequence on a frame whose window already reaches past the clearing, fraction of the line. */
const MIXED_POSITIVE_ERROR = 0.008;

/** Spacing of the first look for onset and clearing, and how long a fault it covers; longer ones have frames with their whole window inside. */
const GRID_S = 0.004;
const LONGEST_SHORT_FAULT_S = 0.3;

interface Phasors {
  readonly ends: readonly EndPhasors[];
  readonly timing: Timing;
  readonly residual: number | undefined;
  readonly isMixed: boolean;
}

/** Never throws on data: what cannot be located yet is "wait". */
export function locate(disturbance: LineDisturbance): Finding {
  const isAtRest = disturbance.ends.every((end) => end.progress.restsSince !== undefined);
  const phasors = isAtRest ? settledPhasors(disturbance.ends) : earlyPhasors(disturbance.ends);
  if (!phasors) return { kind: "wait" };
  const { ends, timing } = phasors;
  const verdict = judge(ends, disturbance.line.nominalKv, phasors.isMixed);
  if (verdict.kind === "undecided") return { kind: "wait" };
  const onsetS = timing.onsetS;
  if (verdict.kind === "no fault") return { kind: "elsewhere", reason: verdict.reason, onsetS };
  if (verdict.kind === "behind") {
    const terminal = disturbance.line.terminals[verdict.endIndex]!;
    return {
      kind: "elsewhere",
      reason: `behind ${disturbance.stationName(terminal.stationId)}, seen from ${disturbance.line.name}`,
      onsetS,
    };
  }
  const location = locationOf(disturbance, phasors);
  if (!location) return { kind: "wait" };
  if (Number.isFinite(timing.clearingS) && !hasOpened(disturbance.ends, ends, location.phases)) {
    return { kind: "elsewhere", reason: `not a fault: no pole of ${disturbance.line.name} opened`, onsetS };
  }
  return { kind: "located", location, onsetS, clearingS: timing.clearingS };
}

/**
 * Current of a faulted pole after the clearing that counts as none: share of its fault current (a current transformer's own dying current), and ampere
 * (noise). A line that is charged from the other end carries tens of ampere: that is not none.
 */
const OPENED_SHARE = 0.005;
const OPENED_AMP = 5;

/**
 * A fault on this line that ended was ended by this line's breakers: at one measured end at least, the faulted poles carry nothing now. Otherwise the
 * current came and went for another reason: poles closing one after the other, a fault elsewhere.
 */
function hasOpened(captured: readonly CapturedEnd[], ends: readonly EndPhasors[], type: FaultType): boolean {
  return ends.some((end) => {
    const capture = captured.find((c) => c.capture.terminal.id === end.terminal.id)!.capture;
    return phasesOf(type).every((p) => {
      const now = newestCurrentAmp(capture, p);
      const inFault = abs(end.fault[3 + p]!);
      return now < Math.max(OPENED_AMP, OPENED_SHARE * inFault) && inFault > 4 * OPENED_AMP;
    });
  });
}

/** All windows have passed all changes: fit onset and clearing on all ends together, then take the best phasors of each end. */
function settledPhasors(ends: readonly CapturedEnd[]): Phasors | undefined {
  const prepared = ends.map(({ capture, window }) => prepareEnd({ ...capture, window }, PROFILE.offsetS));
  const earliest = Math.min(...ends.map((e) => e.disturbedS - e.capture.periodS));
  const latest = Math.min(...ends.map((e) => e.disturbedS + e.window.halfS + 2 * e.capture.periodS));
  const grid = steps(earliest, latest + LONGEST_SHORT_FAULT_S, GRID_S);
  const start = roughTiming(prepared, grid, steps(earliest, latest, GRID_S).length - 1);
  const { timing } = fitTiming(prepared, start, PROFILE);
  let residual: number | undefined;
  const phasors = ends.map(({ capture, window }): EndPhasors => {
    const whole = wholeWindowPhasors(capture, window, timing, true);
    if (whole) return whole;
    const unmixed = unmixedPhasors(capture, window, timing);
    residual = Math.max(residual ?? 0, unmixed.residual);
    return unmixed.end;
  });
  return { ends: phasors, timing, residual, isMixed: false };
}

const steps = (from: number, to: number, by: number): number[] =>
  Array.from({ length: Math.max(1, Math.floor((to - from) / by + 1)) }, (_, k) => from + k * by);

/** Excursion over its peak at which a frame is "deep in the fault", and change over peak at which two frames are alike. */
const DEEP = 0.8;
const ALIKE = 0.05;

/**
 * Before the clearing is known. A unit with a short window shows a plateau: its frames lie wholly in the fault (the first disturbed stamp can lie half a
 * window before the onset, so two halves after it is the earliest). Units with the same longer window are compared on the deepest common frame.
 */
function earlyPhasors(ends: readonly CapturedEnd[]): Phasors | undefined {
  const plateaus = ends.flatMap((end) => {
    const { capture, window } = end;
    const { excursionAmp, changeAmp, peakAmp } = end.progress;
    const n = [...capture.timesS.keys()].find(
      (k) =>
        capture.timesS[k]! >= end.disturbedS + 2 * window.halfS &&
        excursionAmp[k]! > DEEP * peakAmp &&
        changeAmp[k]! < ALIKE * peakAmp,
    );
    if (n === undefined) return [];
    const at = capture.timesS[n]!;
    const timing = { onsetS: at - window.halfS - 1e-6, clearingS: at + window.halfS + 1e-6 };
    const phasors = wholeWindowPhasors(capture, window, timing, false);
    return phasors ? [{ phasors, timing }] : [];
  });
  if (plateaus.length > 0) {
    const timing = { onsetS: Math.min(...plateaus.map((p) => p.timing.onsetS)), clearingS: Number.POSITIVE_INFINITY };
    return { ends: plateaus.map((p) => p.phasors), timing, residual: undefined, isMixed: false };
  }
  const [a, b] = ends;
  if (!a || !b || a.window.origin !== b.window.origin) return undefined;
  const deepest = ({ capture, progress }: CapturedEnd) => capture.timesS[progress.excursionAmp.indexOf(progress.peakAmp)]!;
  const at = Math.min(deepest(a), deepest(b));
  if (at < Math.min(a.disturbedS, b.disturbedS) + a.window.halfS / 2) return undefined;
  const phasors = [mixedFrame(a.capture, a.window, a.disturbedS, at), mixedFrame(b.capture, b.window, b.disturbedS, at)].filter(
    (x) => x !== undefined,
  );
  if (phasors.length < 2) return undefined;
  const onsetS = Math.min(a.disturbedS, b.disturbedS) + a.window.halfS / 2;
  return { ends: phasors, timing: { onsetS, clearingS: Number.POSITIVE_INFINITY }, residual: undefined, isMixed: true };
}

function locationOf(x: LineDisturbance, { ends, timing, residual, isMixed }: Phasors): Location | undefined {
  const { line } = x;
  const { type, marginDegrees } = selectPhases(faultCurrents(ends));
  const all = gatherEvidence(line, type, ends);
  const evidence = isMixed ? mixedEvidence(all) : all;
  const shared = Math.hypot(
    PLACE_ERROR_FLOOR,
    PLACE_ERROR_OF_RESIDUAL * (residual ?? 0),
    isMixed && type === "ABC" ? MIXED_POSITIVE_ERROR : 0,
  );
  // What both ends unmix wrongly alike drops out between them; one end has it all.
  const alone = Math.max(...ends.map((end) => unmixingError(x, end, timing)));
  const extraSdOf = (used: readonly number[]) => (used.length > 1 ? shared : Math.hypot(shared, alone));
  const stationOf = (e: number) => ends[e]!.terminal.stationId;
  const framesOf = (used: readonly number[]) => [...new Set(used.map((e) => ends[e]!.frames))].join("; ");
  const combined = combine(line, evidence, extraSdOf, framesOf, (used) => used.map(stationOf));
  if (!combined) return undefined;
  const name = (e: EndPhasors) => x.stationName(e.terminal.stationId);
  const { flag, reasons } = flagOf({
    combined,
    lengthKm: line.lengthKm,
    stage: x.stage,
    measuredAt: ends.map(name),
    unmeasured: line.terminals.filter((t) => !ends.some((e) => e.terminal.id === t.id)).map((t) => x.stationName(t.stationId)),
    residual,
    frames: framesOf([...ends.keys()]),
    phaseMarginDegrees: marginDegrees,
    missingFrames: x.ends.reduce((s, e) => s + e.capture.missingFrames, 0),
    unsynchronisedAt: x.ends.filter((e) => !e.capture.isSynchronised).map((e) => x.stationName(e.capture.terminal.stationId)),
    unmodelled: unmodelledOn(line, type, ends, x.stationName),
    isStillOn: x.stage !== "provisional" && timing.clearingS === Number.POSITIVE_INFINITY,
  });
  const spanTowers = towerSpan(line.towers, combined.km, combined.km);
  return {
    lineId: line.id,
    phases: type,
    km: combined.km,
    ...(spanTowers ? { spanTowers } : {}),
    pieces: combined.pieces,
    stretchKm: hull(combined),
    flag,
    reasons,
    resistanceOhm: resistanceOf(combined),
    estimates: combined.estimates,
    density: combined.density,
  };
}

/** What the network file says stands on the line and these ends' methods do not allow for: the place may then err by far more than its stretch says. */
function unmodelledOn(line: Line, type: FaultType, ends: readonly EndPhasors[], stationName: (id: string) => string): string[] {
  const found: string[] = [];
  if (line.seriesCapacitor) found.push("series capacitor on this line is not allowed for");
  if (ends.length < 2) {
    if (line.parallel && isGrounded(type)) found.push("coupling with the parallel circuit is not allowed for");
    const converter = line.terminals.find((t) => t.source === "converter" && !ends.some((e) => e.terminal.id === t.id));
    if (converter) found.push(`converter at ${stationName(converter.stationId)} is taken for a usual source`);
  }
  return found;
}

/**
 * Error of one end's place that unmixing leaves, fraction of the line: it grows with the square of window over fault duration, since the less of a window lies in
 * the fault the more the clearing's unknown profile counts. Set on campaigns of other seeds than the one that accuracy is reported on.
 */
function unmixingError(x: LineDisturbance, end: EndPhasors, timing: Timing): number {
  const captured = x.ends.find((c) => c.capture.terminal.id === end.terminal.id);
  if (!captured || end.frames !== UNMIXED || !Number.isFinite(timing.clearingS)) return 0;
  return UNMIXING_ERROR * Math.min(60, ((2 * captured.window.halfS) / (timing.clearingS - timing.onsetS)) ** 2);
}

/**
 * Mixing spoils what one end says, not what two ends with the same window say of negative sequence, which is nought before and after. Superimposed
 * positive sequence is not nought after the clearing, and serves only where there is nothing else. Of resistance a mixed frame says nothing.
 */
function mixedEvidence({ answers, draws }: Evidence): Evidence {
  const hasNegative = answers.some((a) => a.method === NEGATIVE_TWO_ENDED);
  return {
    draws,
    answers: answers.map(({ resistanceOhm: _, ...a }) => ({
      ...a,
      isOnlyShown: a.ends.length < 2 || (hasNegative && a.method !== NEGATIVE_TWO_ENDED),
    })),
  };
}

const hull = ({ pieces }: Combined): readonly [number, number] => [
  Math.min(...pieces.map((p) => p.lowKm)),
  Math.max(...pieces.map((p) => p.highKm)),
];

/** Of the answer that counts most and knows one. */
function resistanceOf({ estimates }: Combined): number | null {
  const known = estimates.filter((e) => e.resistanceOhm !== undefined && e.weight > 0).sort((p, q) => q.weight - p.weight);
  return known[0]?.resistanceOhm ?? null;
}
