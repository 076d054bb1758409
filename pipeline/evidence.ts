/**
 * All methods on the phasors of one disturbance, and how their answers spread together when everything that is uncertain is drawn at random:
 * phasor noise, instrument transformer class, line constants, angle of the far source. Drawing everything at once keeps what methods share.
 */
import type { Line, Terminal, TransformerClass } from "../config/index.ts";
import { abs, add, type Complex, complex, div, mul, polar, scale, sub } from "./complex.ts";
import { isGrounded, loopCurrent, loopVoltage, phasesOf, superimposedLoopCurrent } from "./fault-loop.ts";
import { type SequenceLine, sequenceLine } from "./long-line.ts";
import { simpleReactance } from "./methods/reactance.ts";
import { difference, type EndSequences, sequencesAlong, takagi, takagiLongLine } from "./methods/takagi.ts";
import { twoEndedSynchronised } from "./methods/two-ended.ts";
import { leadOfFaultCurrent } from "./methods/wiszniewski.ts";
import { normalDeviates } from "./random.ts";
import { type Abc, toPhases, toSequence } from "./sequence.ts";
import type { FaultType } from "./types.ts";

/** What unmixing (or a frame that lies wholly in the fault) says of one end. Order VA VB VC IA IB IC. */
export interface EndPhasors {
  readonly terminal: Terminal;
  readonly pre: readonly Complex[];
  readonly fault: readonly Complex[];
  /** Standard deviation of re (as of im) [V, A]. */
  readonly preSd: readonly number[];
  readonly faultSd: readonly number[];
  /** In words: "unmixed", "whole window in the fault". */
  readonly frames: string;
}

export interface MethodAnswer {
  readonly method: string;
  /** Indices into the ends. */
  readonly ends: readonly number[];
  /** Shown, but not part of the joint density. */
  readonly isOnlyShown: boolean;
  readonly witness: string;
  /** Fraction of the line from its first terminal. */
  readonly m: number;
  readonly resistanceOhm?: number;
}

export const NEGATIVE_TWO_ENDED = "two-ended negative sequence";

interface LineModel {
  readonly z1: Complex;
  readonly z0: Complex;
  readonly line1: SequenceLine;
  readonly line0: SequenceLine;
}

const modelOf = (z1: Complex, z0: Complex, b1: number, b0: number): LineModel => ({
  z1,
  z0,
  line1: sequenceLine(z1, b1),
  line0: sequenceLine(z0, b0),
});

const abcOf = (x: readonly Complex[], first: 0 | 3): Abc => [x[first]!, x[first + 1]!, x[first + 2]!];

function sequencesOf(pre: readonly Complex[], fault: readonly Complex[]): EndSequences {
  const v = toSequence(abcOf(fault, 0));
  const i = toSequence(abcOf(fault, 3));
  return { v, i, deltaV: difference(v, toSequence(abcOf(pre, 0))), deltaI: difference(i, toSequence(abcOf(pre, 3))) };
}

/**
 * Place from one end, with the angle of the current distribution: the source behind this end comes from the event itself (−ΔV1/ΔI1), the far one is given.
 * @param extraTurnRad  further angle between the fault's current and the superimposed current here
 */
function oneEnded(type: FaultType, seq: EndSequences, model: LineModel, farSource: Complex, extraTurnRad: number): number {
  const near = div(scale(seq.deltaV.positive, -1), seq.deltaI.positive);
  let m = takagiLongLine(type, seq, model, extraTurnRad);
  // A source behind a measured end is inductive; a value that is not says that the event cannot tell it.
  if (!(near.im > 0 && near.re > -near.im)) return m;
  for (let k = 0; k < 2 && Number.isFinite(m); k++) {
    const held = Math.min(1, Math.max(0, m));
    m = takagiLongLine(type, seq, model, extraTurnRad + leadOfFaultCurrent(held, model.z1, near, farSource));
  }
  return m;
}

/** Every method on one set of phasors. `far`: for each end, the source taken to stand behind the other end, and an angle that no source explains. */
function answersOf(
  type: FaultType,
  ends: readonly { index: number; pre: readonly Complex[]; fault: readonly Complex[] }[],
  model: LineModel,
  far: readonly { readonly source: Complex; readonly turnRad: number }[],
): MethodAnswer[] {
  const answers: MethodAnswer[] = [];
  const k0 = div(sub(model.z0, model.z1), scale(model.z1, 3));
  const seqs = ends.map((end) => sequencesOf(end.pre, end.fault));
  ends.forEach((end, e) => {
    const seq = seqs[e]!;
    const mirrored = (m: number) => (end.index === 0 ? m : 1 - m);
    const loopV = loopVoltage(type, abcOf(end.fault, 0));
    const loopI = loopCurrent(type, abcOf(end.fault, 3), k0);
    const loopDelta = superimposedLoopCurrent(type, seq.deltaI);
    const witness = `end ${end.index}`;
    answers.push(
      { method: "simple reactance", ends: [e], isOnlyShown: true, witness, m: mirrored(simpleReactance(loopV, loopI, model.z1)) },
      { method: "Takagi", ends: [e], isOnlyShown: true, witness, m: mirrored(takagi(loopV, loopI, loopDelta, model.z1)) },
      {
        method: "Takagi, long line",
        ends: [e],
        isOnlyShown: false,
        witness,
        m: mirrored(oneEnded(type, seq, model, far[e]!.source, far[e]!.turnRad)),
      },
    );
  });
  const a = ends.findIndex((end) => end.index === 0);
  const b = ends.findIndex((end) => end.index === 1);
  if (a >= 0 && b >= 0) {
    const [sa, sb] = [seqs[a]!, seqs[b]!];
    const both = (method: string, line: SequenceLine, pick: (s: EndSequences) => { v: Complex; i: Complex }) => {
      const m = twoEndedSynchronised(line, pick(sa), pick(sb)).re;
      answers.push({
        method,
        ends: [a, b],
        isOnlyShown: false,
        witness: "both ends",
        m,
        ...resistanceAt(type, m, sa, sb, model),
      });
    };
    if (type !== "ABC") both(NEGATIVE_TWO_ENDED, model.line1, (s) => ({ v: s.deltaV.negative, i: s.deltaI.negative }));
    both("two-ended superimposed positive sequence", model.line1, (s) => ({ v: s.deltaV.positive, i: s.deltaI.positive }));
  }
  return answers;
}

/** Fault resistance from the voltage at the place and the sum of both ends' currents there: mean over the faulted phases, or between the pair. */
function resistanceAt(
  type: FaultType,
  m: number,
  a: EndSequences,
  b: EndSequences,
  model: LineModel,
): { resistanceOhm?: number } {
  if (!(m > -0.1 && m < 1.1)) return {};
  const fromA = sequencesAlong(model, a.v, a.i, m);
  const fromB = sequencesAlong(model, b.v, b.i, 1 - m);
  const v = toPhases(fromA.v);
  const ia = toPhases(fromA.i);
  const ib = toPhases(fromB.i);
  const phases = phasesOf(type);
  if (!isGrounded(type) && phases.length === 2) {
    const [p, q] = phases as [number, number];
    return { resistanceOhm: div(sub(v[p]!, v[q]!), add(ia[p]!, ib[p]!)).re };
  }
  const each = phases.map((p) => div(v[p]!, add(ia[p]!, ib[p]!)).re);
  return { resistanceOhm: each.reduce((s, r) => s + r, 0) / each.length };
}

export interface Evidence {
  /** On the phasors as measured. */
  readonly answers: readonly MethodAnswer[];
  /** [draws][answers] fraction of the line; NaN where a method gave none. */
  readonly draws: readonly Float64Array[];
}

/** Enough for a 90 % interval to be good to about a tenth of its width. */
const DRAWS = 240;
/**
 * The source behind the far end, where the network file gives none: as strong as a usual transmission station, known to a factor of two and a few degrees.
 * Common practice, no source.
 */
const USUAL_SHORT_CIRCUIT_MVA = 4_000;
const USUAL_SOURCE_ANGLE_RAD = (85 * Math.PI) / 180;
const SOURCE_SIZE_SD = Math.LN2;
const SOURCE_ANGLE_SD_RAD = (2.5 * Math.PI) / 180;
/** The same for a source that the file gives. */
const GIVEN_SIZE_SD = 0.2;
const GIVEN_ANGLE_SD_RAD = (1 * Math.PI) / 180;
/** What lumped distribution factors leave of the angle: charging, load, the decaying offset. */
const LEFT_ANGLE_SD_RAD = (0.5 * Math.PI) / 180;

function farSourceOf(
  line: Line,
  endIndex: number,
): { readonly source: Complex; readonly sizeSd: number; readonly angleSdRad: number } {
  const given = line.terminals.find((t) => t.index !== endIndex)?.sourceZ1;
  if (given) return { source: given, sizeSd: GIVEN_SIZE_SD, angleSdRad: GIVEN_ANGLE_SD_RAD };
  return {
    source: polar(line.nominalKv ** 2 / USUAL_SHORT_CIRCUIT_MVA, USUAL_SOURCE_ANGLE_RAD),
    sizeSd: SOURCE_SIZE_SD,
    angleSdRad: SOURCE_ANGLE_SD_RAD,
  };
}

/** A limit of a class taken as the bound of an even spread. */
const SD_OF_LIMIT = 1 / Math.sqrt(3);

/** @param ends  one or two, those with index 0 or 1 of the line */
export function gatherEvidence(line: Line, type: FaultType, ends: readonly EndPhasors[], seed = 1): Evidence {
  const { z1, z0, b1, b0, z1Percent, z0Percent } = line.constants;
  const plain = ends.map((end) => ({ index: end.terminal.index, pre: end.pre, fault: end.fault }));
  const usual = ends.map((end) => farSourceOf(line, end.terminal.index));
  const answers = answersOf(
    type,
    plain,
    modelOf(z1, z0, b1, b0),
    usual.map(({ source }) => ({ source, turnRad: 0 })),
  );
  const normal = normalDeviates(seed);
  const draws = Array.from({ length: DRAWS }, () => {
    const model = modelOf(stretched(z1, z1Percent, normal), stretched(z0, z0Percent, normal), b1, b0);
    const drawn = ends.map((end) => {
      const measured = end.terminal.measured!;
      const gains = end.fault.map((_, c) => gainOf(c < 3 ? measured.voltageTransformer : measured.currentTransformer, normal));
      const noisy = (x: readonly Complex[], sd: readonly number[]) =>
        x.map((value, c) => mul(gains[c]!, add(value, complex(sd[c]! * normal(), sd[c]! * normal()))));
      return { index: end.terminal.index, pre: noisy(end.pre, end.preSd), fault: noisy(end.fault, end.faultSd) };
    });
    const far = usual.map(({ source, sizeSd, angleSdRad }) => ({
      source: mul(source, polar(Math.exp(sizeSd * normal()), angleSdRad * normal())),
      turnRad: LEFT_ANGLE_SD_RAD * normal(),
    }));
    return Float64Array.from(answersOf(type, drawn, model, far), (answer) => answer.m);
  });
  return { answers, draws };
}

/** Resistance and reactance err each on their own. */
const stretched = (z: Complex, percent: number, normal: () => number): Complex =>
  complex(z.re * (1 + (percent / 100) * normal()), z.im * (1 + (percent / 100) * normal()));

function gainOf(limit: TransformerClass, normal: () => number): Complex {
  const size = 1 + ((limit.ratioPercent * SD_OF_LIMIT) / 100) * normal();
  const angle = ((limit.angleMinutes * SD_OF_LIMIT) / 60) * (Math.PI / 180) * normal();
  return complex(size * Math.cos(angle), size * Math.sin(angle));
}

/** Superimposed sequence currents summed over the ends: the fault's own when both are there. */
export function faultCurrents(ends: readonly EndPhasors[]) {
  return ends
    .map((end) => sequencesOf(end.pre, end.fault).deltaI)
    .reduce((sum, i) => ({
      zero: add(sum.zero, i.zero),
      positive: add(sum.positive, i.positive),
      negative: add(sum.negative, i.negative),
    }));
}

/** Largest superimposed phase current of an end [A]. */
export const superimposedAmp = (end: EndPhasors): number =>
  Math.max(...[3, 4, 5].map((c) => abs(sub(end.fault[c]!, end.pre[c]!))));
